"""Fitted curves of the units, in the units of the page's axes."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.one_process import GroupFit, OneProcess, site_names
from structmap.page.listing import Listing
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
        ``x``, and for each entry the shared curve ``y`` and its own curve ``alone``;
        for each unit in ``scaled`` the verdict, and for each fitted member baseline
        and height by which its points are laid on the others. None without fits.
    """
    fits = [_fit_of(record.process_of(unit)) for unit in record.units]
    kept = np.sort(x[record.measurements.point_kept])
    known = [fit for fit in fits if fit and len(fit.profiles.x) == len(kept)]
    if not known or len(known) < len(fits):
        return None
    grid = known[0].curve_x
    some = np.unique(np.linspace(0, len(grid) - 1, CURVE_POINTS).astype(int))
    shown_x = np.interp(grid[some], np.sort(known[0].profiles.x), kept)
    entry = _entry_of_name(record, listing)
    y: list[Any] = [None] * len(listing.residue)
    alone: list[Any] = [None] * len(listing.residue)
    scaled = []
    for unit, fit in zip(record.units, known, strict=True):
        process = record.process_of(unit)
        verdict = process.verdict if process else ""
        curves = {"shared": fit.curve[:, some], "alone": _alone(fit, grid[some])}
        scaled.append(_scaled(fit, curves, entry, verdict))
        for place, name in enumerate(fit.profiles.name):
            y[entry[name]] = _short(curves["shared"][place])
            alone[entry[name]] = _short(curves["alone"][place])
    return {"x": _short(shown_x), "y": y, "alone": alone, "scaled": scaled}


def _fit_of(process: OneProcess | None) -> GroupFit | None:
    return process.fit if process is not None else None


def _entry_of_name(record: AnalysisRecord, listing: Listing) -> dict[str, int]:
    names = site_names(record.table)
    return {
        names[record.sites.row[site]]: place
        for place, site in enumerate(listing.site.tolist())
        if site >= 0
    }


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


def _scaled(
    fit: GroupFit,
    curves: dict[str, NDArray[np.float64]],
    entry: dict[str, int],
    verdict: str,
) -> dict[str, Any]:
    """Return how members are laid on one another: 0 foot of the curve, 1 its height."""
    apart = verdict == "distinct" and np.isfinite(curves["alone"]).all()
    drawn = curves["alone"] if apart else curves["shared"]
    low = drawn.min(axis=1)
    height = drawn.max(axis=1) - low
    return {
        "verdict": verdict,
        "apart": bool(apart),
        "members": [entry[name] for name in fit.profiles.name],
        "low": _short(low),
        "height": _short(np.where(height > 0, height, 1.0)),
    }
