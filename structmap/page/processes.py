"""The fits of one shared value to the units, as the page draws them."""

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from structmap import words
from structmap.one_process import GroupFit, OneProcess, prefix_of, site_names
from structmap.page.listing import Listing
from structmap.page.markup import mark_text, mark_unit
from structmap.result import AnalysisRecord

CURVE_POINTS = 81
APART = 0.2
ROOM = 2.0
"""Misfit is shown up to so many times the rise to its limit above the limit."""


def unit_fits(record: AnalysisRecord, listing: Listing) -> list[dict[str, Any] | None]:
    """Return for each unit the misfit over its shared value, and the interval.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    list of dict or None
        In the order of the units, None where nothing was fitted. Values of the shared
        parameter are in ``unit``, the same for all units; ``x`` and ``y`` are the
        misfit near its lowest, ``best`` and ``lowest`` where that is; ``low`` and
        ``high`` are None at an open end, ``open`` says which of the two are;
        ``limit`` is the misfit at the ends of the interval; ``each`` the
        misfit with a value for each site; ``free`` are the values of ``members`` alone,
        those set apart too, None at an end of the range searched; ``caption`` and
        ``figures`` say it in words.
    """
    processes = [record.process_of(unit) for unit in record.units]
    fitted = [process for process in processes if process and words.shown_fit(process)]
    if not fitted:
        return [None] * len(processes)
    entry = entry_of_name(record, listing)
    scale, unit = _common_unit(fitted)
    return [
        _unit_fit(record, process, entry=entry, scale=scale, unit=unit)
        if process and process in fitted
        else None
        for process in processes
    ]


def entry_of_name(record: AnalysisRecord, listing: Listing) -> dict[str, int]:
    """Return the entry of each site that a fit names.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    dict
        Index of the entry by the name of the site in the table.
    """
    names = site_names(record.table)
    return {
        names[record.sites.row[site]]: place
        for place, site in enumerate(listing.site.tolist())
        if site >= 0
    }


def _common_unit(fitted: list[OneProcess]) -> tuple[float, str]:
    """Return the unit with a prefix that suits the middle of all shared values."""
    best = [fit.best for fit in map(words.shown_fit, fitted) if fit is not None]
    return prefix_of(float(np.median(best)), fitted[0].unit)


def _unit_fit(
    record: AnalysisRecord,
    process: OneProcess,
    *,
    entry: dict[str, int],
    scale: float,
    unit: str,
) -> dict[str, Any]:
    fit = words.shown_fit(process)
    every = process.fit
    assert fit is not None and every is not None  # noqa: S101, PT018
    at, misfit = misfit_curve(fit)
    low, high = _number(process.low / scale), _number(process.high / scale)
    return {
        "parameter": mark_text(process.parameter),
        "unit": mark_unit(unit),
        "log": fit.model.shared.scale == "log",
        "verdict": process.verdict,
        "value": _number(fit.shared / scale),
        "best": _number(fit.best / scale),
        "low": low,
        "high": high,
        "open": [low is None, high is None],
        "x": [_number(v / scale) for v in at.tolist()],
        "y": [_number(v) for v in misfit.tolist()],
        "lowest": _number(fit.chi2_shared),
        "limit": _number(fit.interval_limit),
        "each": _number(fit.chi2_free),
        "members": [entry[name] for name in every.profiles.name],
        "free": [_number(v / scale) for v in every.free.tolist()],
        "caption": [mark_text(line) for line in words.misfit_caption(record, process)],
        "figures": words.misfit_figures(process),
    }


def _number(value: float) -> float | None:
    return float(f"{value:.5g}") if np.isfinite(value) else None


def misfit_curve(fit: GroupFit) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return misfit over the shared value near its lowest.

    Parameters
    ----------
    fit : GroupFit
        Of a group.

    Returns
    -------
    value : ndarray of float, shape (81,)
        Even on the axis of the parameter. From where the misfit comes down to twice
        the rise to its limit above the limit, to where it leaves that again, or to an
        end of the range searched; values of sites alone lie within where a factor of
        three, or a third of the range, suffices.
    misfit : ndarray of float, shape (81,)
        A cubic spline through the nodes of the fit, its lowest point and the ends of
        its interval, on the axis of the parameter.
    """
    log = fit.model.shared.scale == "log"
    forth, back = (np.log, np.exp) if log else (np.asarray, np.asarray)
    node, curve = _smooth_misfit(fit, forth)
    top = fit.interval_limit + ROOM * (fit.interval_limit - fit.chi2_shared)
    fine = np.linspace(node[0], node[-1], 20 * len(node))
    below = np.flatnonzero(curve(fine) <= top)
    low, high = fine[max(below[0] - 1, 0)], fine[min(below[-1] + 1, len(fine) - 1)]
    reach = np.log(3.0) if log else (node[-1] - node[0]) / 3
    free = forth(fit.free[np.isfinite(fit.free)])
    near = free[(free > low - reach) & (free < high + reach)]
    at = np.linspace(min(low, *near, high), max(high, *near, low), CURVE_POINTS)
    return np.asarray(back(at)), np.asarray(curve(at))


def _smooth_misfit(
    fit: GroupFit, forth: Callable[..., NDArray[np.float64]]
) -> tuple[NDArray[np.float64], CubicSpline]:
    """Return nodes on the axis and the spline; exact points need room beside nodes."""
    node = np.asarray(forth(fit.grid))
    exact = np.array([fit.best, fit.low, fit.high])
    height = np.array([fit.chi2_shared, fit.interval_limit, fit.interval_limit])
    at = np.asarray(forth(exact))
    apart = np.abs(at[:, None] - node).min(axis=1) > APART * np.diff(node).min()
    known = np.isfinite(at) & apart
    _, first = np.unique(at, return_index=True)
    known &= np.isin(np.arange(len(at)), first)
    place = np.concatenate([node, at[known]])
    order = np.argsort(place)
    value = np.concatenate([fit.grid_shared, height[known]])[order]
    return node, CubicSpline(place[order], value)
