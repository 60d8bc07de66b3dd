"""One of several shift lists of a file, and the long table of a titration."""

import re
from dataclasses import replace

import numpy as np

from structmap.errors import UnusableProfileError
from structmap.values import ValueTable

_OF_A_LIST = re.compile(r"^(shift_(?:HA|CA|CB|H|N|C))_(?!A$|B$)(.+)$")


def pick_list(table: ValueTable, wanted: str = "") -> ValueTable:
    """Return one of the shift lists that a file holds.

    Parameters
    ----------
    table : ValueTable
        As read; shifts of several lists carry the name of their save frame.
    wanted : str, optional
        Name of the save frame, or its number counted from 1; blank where there is
        but one.

    Returns
    -------
    ValueTable
        With that list under plain names; unchanged where the file holds one list.

    Raises
    ------
    UnusableProfileError
        If the file has several lists and none is chosen, or not the one named.
    """
    parts = {one.name: _OF_A_LIST.match(one.name) for one in table.quantities}
    frames = tuple(dict.fromkeys(found[2] for found in parts.values() if found))
    if not frames and not wanted:
        return table
    chosen = wanted
    if wanted.isdigit() and 0 < int(wanted) <= len(frames):
        chosen = frames[int(wanted) - 1]
    if chosen not in frames:
        raise UnusableProfileError(*_refusal(table, frames, wanted))
    kept = tuple(
        replace(one, name=found[1])
        for one in table.quantities
        if (found := parts[one.name]) and found[2] == chosen
    )
    note = f"{table.names[0]}: shift list {chosen} taken."
    return replace(table, quantities=kept, notes=(*table.notes, note))


def _refusal(
    table: ValueTable, frames: tuple[str, ...], wanted: str
) -> tuple[str, str, str]:
    name = table.names[0]
    if not frames:
        return name, f"there is no list {wanted} to choose", "leave --list out for it"
    listed = ", ".join(frames)
    if not wanted:
        return name, f"holds several shift lists ({listed})", "name one with --list"
    return name, f"there is no shift list {wanted} (it holds {listed})", "choose one"


def profile_rows(table: ValueTable) -> list[dict[str, str]]:
    """Return a titration as a long table that every command reads.

    Parameters
    ----------
    table : ValueTable
        Of `perturbation_table`, with x.

    Returns
    -------
    list of dict of str to str
        One row a point that was measured.
    """
    (quantity,) = table.quantities
    rows = []
    for row in range(len(table.line)):
        for point in np.flatnonzero(np.isfinite(quantity.value[row])):
            error = quantity.error[row, point]
            cells = {
                "auth_asym_id": str(table.auth_asym_id[row]),
                "auth_seq_id": str(table.auth_seq_id[row]),
                "pdbx_PDB_ins_code": str(table.ins_code[row]),
                "auth_comp_id": str(table.comp_id[row]),
                f"x [{quantity.x_unit}]": f"{quantity.x[point]:.10g}",
                f"value={quantity.name} [{quantity.unit}]": (
                    f"{quantity.value[row, point]:.6g}"
                ),
                "error": f"{error:.6g}" if np.isfinite(error) else "",
            }
            rows.append(cells)
    return rows
