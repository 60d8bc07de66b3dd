"""Peaks of shift lists, one or two a residue, out of tables of values."""

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from structmap.errors import UnusableProfileError
from structmap.shifts.changes import FloatArray
from structmap.values import Quantity, ValueTable

SiteKey = tuple[str, int, str]

NITROGEN_WEIGHT, GLYCINE_WEIGHT = 0.14, 0.20
"""Weights of 15N against 1H; Williamson, Prog. NMR Spectrosc. 73, 1 (2013)."""
_SHIFT_NAME = re.compile(r"^(?:shift_)?(H|HN|N|C|CA|CB)(?:_(A|B))?$")
_HEIGHT_NAME = re.compile(r"^(?:height|intensity|volume)(?:_(A|B))?$", re.IGNORECASE)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Peaks:
    """Peaks of one shift list by site.

    Attributes
    ----------
    first : dict
        Shifts and errors of the only or the stronger peak.
    second : dict
        Shifts of the second peak, where there is one.
    height_ratio : dict
        Height of the peak listed first over that of the other; NaN without heights.
    comp_id : dict
        Residue names.
    """

    first: dict[SiteKey, tuple[FloatArray, FloatArray]]
    second: dict[SiteKey, FloatArray]
    height_ratio: dict[SiteKey, float]
    comp_id: dict[SiteKey, str]


def _columns(table: ValueTable) -> dict[tuple[str, str], Quantity]:
    """Return quantities by nucleus (or ``height``) and peak (``A`` or ``B``)."""
    found: dict[tuple[str, str], Quantity] = {}
    for quantity in table.quantities:
        if len(quantity.x):
            continue
        shift = _SHIFT_NAME.match(quantity.name)
        height = _HEIGHT_NAME.match(quantity.name)
        if shift:
            nucleus = "H" if shift[1] == "HN" else shift[1]
            found.setdefault((nucleus, shift[2] or "A"), quantity)
        elif height:
            found.setdefault(("height", height[1] or "A"), quantity)
    return found


def common_nuclei(
    lists: Sequence[ValueTable], weights: Mapping[str, float] | None
) -> tuple[str, ...]:
    """Return the nuclei whose shifts all lists hold.

    Parameters
    ----------
    lists : sequence of ValueTable
        Shift lists.
    weights : mapping of str to float or None
        The nuclei wanted; None wants H and N.

    Returns
    -------
    tuple of str
        At least one.

    Raises
    ------
    UnusableProfileError
        If the lists have none of those wanted in common.
    """
    wanted = tuple(weights) if weights else ("H", "N")
    held = [{nucleus for nucleus, _ in _columns(one)} for one in lists]
    common = tuple(n for n in wanted if all(n in one for one in held))
    if common:
        return common
    poorest = min(range(len(lists)), key=lambda i: len(held[i] & set(wanted)))
    raise UnusableProfileError(
        lists[poorest].names[0],
        f"there are no shifts of {' or '.join(wanted)} that all lists have",
        "name the columns by nucleus, as in H and N",
    )


def read_peaks(table: ValueTable, nuclei: tuple[str, ...]) -> Peaks:
    """Return the peaks of a shift list.

    Parameters
    ----------
    table : ValueTable
        Shifts by nucleus (``H``, ``shift_N``), second peaks in ``H_B``, heights in
        ``height`` and ``height_B``.
    nuclei : tuple of str
        Nuclei that a peak must have all of.

    Returns
    -------
    Peaks
        Of two peaks the stronger one comes first.
    """
    columns = _columns(table)
    peaks = Peaks(first={}, second={}, height_ratio={}, comp_id={})
    for row in range(len(table.line)):
        key = (
            str(table.auth_asym_id[row]),
            int(table.auth_seq_id[row]),
            str(table.ins_code[row]),
        )
        values, errors = _row(columns, nuclei, "A", row)
        if not np.isfinite(values).all():
            continue
        peaks.comp_id[key] = str(table.comp_id[row])
        other, other_errors = _row(columns, nuclei, "B", row)
        heights = [_height(columns, peak, row) for peak in ("A", "B")]
        if np.isfinite(other).all():
            ratio = heights[0] / heights[1]
            peaks.height_ratio[key] = ratio
            if ratio < 1:
                values, errors, other = other, other_errors, values
            peaks.second[key] = other
        peaks.first[key] = values, errors
    return peaks


def _row(
    columns: dict[tuple[str, str], Quantity],
    nuclei: tuple[str, ...],
    peak: str,
    row: int,
) -> tuple[FloatArray, FloatArray]:
    found = [columns.get((nucleus, peak)) for nucleus in nuclei]
    values = [one.value[row, 0] if one else np.nan for one in found]
    errors = [one.error[row, 0] if one else np.nan for one in found]
    return np.array(values), np.array(errors)


def _height(columns: dict[tuple[str, str], Quantity], peak: str, row: int) -> float:
    one = columns.get(("height", peak))
    return float(one.value[row, 0]) if one else float("nan")


def weights_of(
    comp_id: Sequence[str],
    nuclei: tuple[str, ...],
    weights: Mapping[str, float] | None,
) -> FloatArray:
    """Return the weights of the nuclei at all sites.

    Parameters
    ----------
    comp_id : sequence of str
        Residue names; glycine has another weight of 15N.
    nuclei : tuple of str
        The nuclei.
    weights : mapping of str to float or None
        Weights to take instead, at all sites.

    Returns
    -------
    ndarray, shape (n_sites, n_nuclei)
        The proton has 1.
    """
    if weights:
        return np.tile([weights[nucleus] for nucleus in nuclei], (len(comp_id), 1))
    out = np.ones((len(comp_id), len(nuclei)))
    if "N" in nuclei:
        glycine = np.array([name in ("GLY", "G") for name in comp_id], dtype=bool)
        out[:, nuclei.index("N")] = np.where(glycine, GLYCINE_WEIGHT, NITROGEN_WEIGHT)
    return out
