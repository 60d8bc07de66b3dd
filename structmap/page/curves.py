"""Fitted curves of the units, in the units of the page's axes."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.one_process import GroupFit, OneProcess
from structmap.page.listing import Listing
from structmap.page.processes import entry_of_name
from structmap.result import AnalysisRecord

CURVE_POINTS = 61


def fitted_curves(
    record: AnalysisRecord, listing: Listing, x: NDArray[np.float64]
) -> dict[str, Any] | None:
    """Return the fitted curves of all units.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.
    x : ndarray of float, shape (n_points,)
        Where the profiles were measured, as the page shows it.

    Returns
    -------
    dict or None
        ``x``, and for each entry the shared curve ``y``, half the width of its 95 %
        ``band`` and its own curve ``alone``; for each unit in ``scaled`` the verdict,
        and for each fitted member baseline and height by which its points are laid on
        the others. A site that is set apart from its unit has no shared curve; a curve
        that the test rejects has no band. None without fits.
    """
    kept = np.sort(x[record.measurements.point_kept])
    processes = [record.process_of(unit) for unit in record.units]
    fits = [p.fit for p in processes if p and p.fit]
    if not fits or any(len(fit.profiles.x) != len(kept) for fit in fits):
        return None
    grid = fits[0].curve_x
    some = np.unique(np.linspace(0, len(grid) - 1, CURVE_POINTS).astype(int))
    shown_x = np.interp(grid[some], np.sort(fits[0].profiles.x), kept)
    entry = entry_of_name(record, listing)
    columns: dict[str, list[Any]] = {
        key: [None] * len(listing.residue) for key in ("y", "band", "alone")
    }
    scaled = []
    for process in processes:
        if process is None or process.fit is None:
            scaled.append(_not_laid())
            continue
        curves = _curves_of(process, process.fit, some)
        scaled.append(_scaled(process, curves, entry))
        for place, name in enumerate(process.fit.profiles.name):
            for key, column in columns.items():
                column[entry[name]] = _short(curves[key][place])
    return {"x": _short(shown_x), **columns, "scaled": scaled}


def _curves_of(
    process: OneProcess, fit: GroupFit, some: NDArray[np.int64]
) -> dict[str, NDArray[np.float64]]:
    """Return shared curve, band and own curve of each fitted site, NaN for none."""
    shared = fit if process.kept_fit is None else process.kept_fit
    rows = [fit.profiles.name.index(name) for name in shared.profiles.name]
    curve, band = np.full((2, len(fit.profiles.name), len(some)), np.nan)
    curve[rows] = shared.curve[:, some]
    if process.verdict != "distinct":
        band[rows] = shared.band[:, some]
    return {"y": curve, "band": band, "alone": _alone(fit, fit.curve_x[some])}


def _short(values: NDArray[np.float64]) -> list[float] | None:
    if not np.isfinite(values).all():
        return None
    return [float(f"{v:.4g}") for v in values.tolist()]


def _alone(fit: GroupFit, grid: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return each site's curve with its own value of the shared parameter."""
    curves = np.full((len(fit.profiles.name), len(grid)), np.nan)
    if fit.model.companion is not None or fit.model.local is not None:
        return curves
    for place, value in enumerate(fit.free.tolist()):
        present = np.isfinite(fit.profiles.value[place])
        if not np.isfinite(value) or present.sum() < 2:
            continue
        weight = 1.0 / fit.profiles.error[place, present]
        shape = fit.model.function(fit.profiles.x[present], value)
        design = np.stack([shape, np.ones_like(shape)], axis=1) * weight[:, None]
        target = fit.profiles.value[place, present] * weight
        amplitude, baseline = np.linalg.lstsq(design, target, rcond=None)[0]
        curves[place] = baseline + amplitude * fit.model.function(grid, value)
    return curves


def _not_laid() -> dict[str, Any]:
    empty: dict[str, Any] = {"verdict": "", "apart": False, "members": []}
    return {**empty, "low": None, "height": None}


def _scaled(
    process: OneProcess, curves: dict[str, NDArray[np.float64]], entry: dict[str, int]
) -> dict[str, Any]:
    """Return how members are laid on one another: 0 foot of the curve, 1 its height."""
    fit = process.fit
    assert fit is not None  # noqa: S101
    apart = process.verdict == "distinct" and np.isfinite(curves["alone"]).all()
    drawn = curves["alone"] if apart else curves["y"]
    drawn = np.where(np.isnan(drawn), curves["alone"], drawn)
    low = drawn.min(axis=1)
    height = drawn.max(axis=1) - low
    return {
        "verdict": process.verdict,
        "apart": bool(apart),
        "members": [entry[name] for name in fit.profiles.name],
        "low": _short(low),
        "height": _short(np.where(height > 0, height, 1.0)),
    }
