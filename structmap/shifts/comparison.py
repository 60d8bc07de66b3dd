"""Pairing shift lists: changes, lost, new and doubled peaks, titration series."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.errors import UnusableProfileError
from structmap.records import store_read_only
from structmap.shifts.changes import (
    WARN_RATIO,
    FloatArray,
    Threshold,
    combine_changes,
    find_threshold,
)
from structmap.shifts.conformers import DoubledPeaks
from structmap.shifts.peaks import SiteKey, common_nuclei, read_peaks, weights_of
from structmap.values import Quantity, ValueTable


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ShiftComparison:
    """What changes between the first shift list and the others.

    Attributes
    ----------
    site : tuple
        Chain, number and insertion code of every residue that any list holds.
    comp_id : tuple of str
        Residue names as in the lists.
    nuclei : tuple of str
        Nuclei that are combined.
    change : ndarray, shape (n_sites, n_others)
        Combined change in ppm; NaN where either list lacks the peak.
    error : ndarray, shape (n_sites, n_others)
        Its standard error; NaN where no errors are given.
    parts : ndarray, shape (n_sites, n_others, n_nuclei)
        Changes of the nuclei in ppm, other list less the first.
    lost, appeared : ndarray of bool, shape (n_sites, n_others)
        Peaks that only the first list has, and that only the other has.
    doubled : ndarray of bool, shape (n_sites, n_others)
        Sites with two peaks in the other list; the change is that of its stronger
        peak, or of the first where no heights are given.
    threshold : Threshold
        From the last list.
    notes : tuple of str
        Warnings, one sentence each.
    """

    site: tuple[SiteKey, ...]
    comp_id: tuple[str, ...]
    nuclei: tuple[str, ...]
    change: NDArray[np.float64]
    error: NDArray[np.float64]
    parts: NDArray[np.float64]
    lost: NDArray[np.bool_]
    appeared: NDArray[np.bool_]
    doubled: NDArray[np.bool_]
    threshold: Threshold
    notes: tuple[str, ...]

    def __post_init__(self) -> None:
        shape = (len(self.site), None)
        store_read_only(self, "change", np.float64, shape)
        store_read_only(self, "error", np.float64, self.change.shape)
        parts = (*self.change.shape, len(self.nuclei))
        store_read_only(self, "parts", np.float64, parts)
        for name in ("lost", "appeared", "doubled"):
            store_read_only(self, name, np.bool_, self.change.shape)


def compare_shifts(
    lists: Sequence[ValueTable], *, weights: Mapping[str, float] | None = None
) -> ShiftComparison:
    """Pair two or more shift lists and combine the changes from the first one.

    Parameters
    ----------
    lists : sequence of ValueTable
        Quantities named by nucleus (``H``, ``N``, ``shift_N``); a second peak of a
        site stands in ``H_B``, ``N_B``, heights in ``height`` and ``height_B``.
    weights : mapping of str to float, optional
        Weights of the nuclei that enter; the default is 1 for H and 0.14 for N, 0.20
        in glycine.

    Returns
    -------
    ShiftComparison
        For every residue that any list holds, in the order of chain and number.

    Raises
    ------
    UnusableProfileError
        If a list holds none of the nuclei, or no residue stands in two lists.
    ValueError
        If fewer than two lists are given.
    """
    if len(lists) < 2:
        raise ValueError(f"lists holds {len(lists)}; two or more are needed")
    nuclei = common_nuclei(lists, weights)
    peaks = [read_peaks(one, nuclei) for one in lists]
    sites = tuple(sorted({key for one in peaks for key in one.first}))
    names = {key: comp for one in reversed(peaks) for key, comp in one.comp_id.items()}
    comp_id = tuple(names.get(site, "") for site in sites)
    weight = weights_of(comp_id, nuclei, weights)
    shape = (len(sites), len(lists) - 1)
    parts = np.full((*shape, len(nuclei)), np.nan)
    variance = np.full(parts.shape, np.nan)
    flags = np.zeros((3, *shape), dtype=bool)
    for column, other in enumerate(peaks[1:]):
        for row, site in enumerate(sites):
            before, after = peaks[0].first.get(site), other.first.get(site)
            flags[0, row, column] = before is not None and after is None
            flags[1, row, column] = before is None and after is not None
            flags[2, row, column] = site in other.second
            if before is not None and after is not None:
                parts[row, column] = after[0] - before[0]
                variance[row, column] = after[1] ** 2 + before[1] ** 2
    change = combine_changes(parts, weight[:, None])
    if not np.isfinite(change[:, -1]).any():
        raise UnusableProfileError(
            f"{lists[0].names[0]} and {lists[-1].names[0]}",
            "no residue has shifts of the same nuclei in both",
            "check the numbering of the lists",
        )
    threshold = find_threshold(change[:, -1])
    return ShiftComparison(
        site=sites,
        comp_id=comp_id,
        nuclei=nuclei,
        change=change,
        error=_change_error(parts, variance, weight[:, None], change),
        parts=parts,
        lost=flags[0],
        appeared=flags[1],
        doubled=flags[2],
        threshold=threshold,
        notes=_notes(threshold, flags),
    )


def perturbation_table(
    comparison: ShiftComparison,
    *,
    x: ArrayLike | None = None,
    x_name: str = "",
    x_unit: str = "",
) -> ValueTable:
    """Return the changes as measured values that an analysis takes.

    Parameters
    ----------
    comparison : ShiftComparison
        Of two lists, or of a titration.
    x : array_like, shape (n_lists,), optional
        Where each list was measured (total ligand); makes a profile that starts with 0
        at the first list.
    x_name, x_unit : str, optional
        What x is.

    Returns
    -------
    ValueTable
        One quantity ``shift_change`` in ppm; without x, the change to the last list.

    Raises
    ------
    ValueError
        If x has not one value a list, rising.
    """
    change, error = comparison.change[:, -1:], comparison.error[:, -1:]
    places = np.empty(0)
    if x is not None:
        places = np.asarray(x, dtype=np.float64)
        n_lists = comparison.change.shape[1] + 1
        if len(places) != n_lists or not (np.diff(places) > 0).all():
            raise ValueError(f"x must hold {n_lists} rising values, one a list")
        known = np.isfinite(comparison.change).any(axis=1, keepdims=True)
        start = np.where(known, 0.0, np.nan)
        change = np.column_stack([start, comparison.change])
        error = np.column_stack([_mean_error(comparison.error), comparison.error])
    n_rows = len(comparison.site)
    quantity = Quantity(
        name="shift_change",
        unit="ppm",
        x=places,
        x_name=x_name if len(places) else "",
        x_unit=x_unit if len(places) else "",
        value=change,
        error=error,
        has_errors=bool(np.isfinite(error).any()),
    )
    return ValueTable(
        names=("shifts",),
        sha256=("",),
        auth_asym_id=np.array([site[0] for site in comparison.site]),
        auth_seq_id=np.array([site[1] for site in comparison.site]),
        ins_code=np.array([site[2] for site in comparison.site]),
        comp_id=np.array(comparison.comp_id),
        atom=np.full(n_rows, ""),
        group=np.full(n_rows, ""),
        line=np.arange(n_rows) + 2,
        quantities=(quantity,),
        notes=comparison.notes,
    )


def perturbation_rows(
    comparison: ShiftComparison, *, doubled: DoubledPeaks | None = None
) -> list[dict[str, str]]:
    """Return the rows of the table that ``structmap shifts`` writes.

    Parameters
    ----------
    comparison : ShiftComparison
        Of two or more lists; changes are those to the last.
    doubled : DoubledPeaks, optional
        Doubled peaks of the last list, which add the population of the stronger one.

    Returns
    -------
    list of dict of str to str
        Site columns, the combined change with its error, the parts, and a note.
    """
    populations = (
        dict(zip(doubled.site, doubled.population, strict=True)) if doubled else {}
    )
    rows = []
    for row, (site, comp) in enumerate(
        zip(comparison.site, comparison.comp_id, strict=True)
    ):
        change = comparison.change[row, -1]
        cells = {
            "auth_asym_id": site[0],
            "auth_seq_id": str(site[1]),
            "pdbx_PDB_ins_code": site[2],
            "auth_comp_id": comp,
            "shift_change [ppm]": _shown(change),
            "shift_change_error": _shown(comparison.error[row, -1]),
        }
        for nucleus, part in zip(
            comparison.nuclei, comparison.parts[row, -1], strict=True
        ):
            cells[f"{nucleus}_change"] = _shown(part)
        if doubled is not None:
            cells["population"] = _shown(populations.get(site, np.nan))
        cells["note"] = _note(comparison, row)
        rows.append(cells)
    return rows


def _change_error(
    parts: FloatArray, variance: FloatArray, weight: FloatArray, change: FloatArray
) -> FloatArray:
    """Return standard errors of the combined changes, by the delta method."""
    n_nuclei = parts.shape[-1]
    length = np.where(change > 0, change, 1.0)[..., None]
    slope = weight**2 * parts / (n_nuclei * length)
    # At no change the length has no slope; the error of one nucleus then stands for it.
    flat = weight / np.sqrt(n_nuclei)
    slope = np.where((change > 0)[..., None], slope, flat)
    return np.asarray(np.sqrt((slope**2 * variance).sum(axis=-1)))


def _mean_error(error: FloatArray) -> FloatArray:
    """Return the mean error of each site over the lists that have it."""
    known = np.isfinite(error)
    total = np.where(known, error, 0.0).sum(axis=1)
    count = known.sum(axis=1)
    mean = np.full(len(error), np.nan)
    np.divide(total, count, out=mean, where=count > 0)
    return mean


def _notes(threshold: Threshold, flags: NDArray[np.bool_]) -> tuple[str, ...]:
    notes = []
    if threshold.warns:
        notes.append(
            f"Many sites change: the usual spread {threshold.sigma:.3g} ppm is more "
            f"than {WARN_RATIO} times the median-based {threshold.median_sigma:.3g} "
            "ppm, which is used."
        )
    for flag, what in zip(flags, ("lost", "new", "doubled"), strict=True):
        count = int(flag[:, -1].sum())
        if count:
            plural = "peak is" if count == 1 else "peaks are"
            notes.append(f"{count} {plural} {what} in the last list.")
    return tuple(notes)


def _note(comparison: ShiftComparison, row: int) -> str:
    if comparison.lost[row, -1]:
        return "lost"
    if comparison.appeared[row, -1]:
        return "new"
    change, threshold = comparison.change[row, -1], comparison.threshold
    words = ["doubled"] if comparison.doubled[row, -1] else []
    if change > threshold.strong:
        words.append("strong")
    elif change > threshold.significant:
        words.append("significant")
    return "; ".join(words)


def _shown(value: float) -> str:
    return f"{value:.6g}" if np.isfinite(value) else ""
