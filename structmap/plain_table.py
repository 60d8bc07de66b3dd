"""Tables as text."""

import math
import re
from dataclasses import dataclass

import numpy as np

_TO_QUOTE = re.compile('[,"\n\r]')

Cell = str | int | float | bool | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table before it is written.

    Attributes
    ----------
    columns : tuple of str
        Heading.
    rows : tuple of tuple
        Cells: text, numbers, truth values, None for blank.
    """

    columns: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]


def table_text(table: Table) -> str:
    """Return a table as CSV: no comments, ``yes`` and ``no``, blank for nothing.

    Parameters
    ----------
    table : Table
        The measured values.

    Returns
    -------
    str
        Lines that end in a line feed.
    """
    lines = [table.columns, *table.rows]
    return "".join(",".join(cell_text(cell) for cell in line) + "\n" for line in lines)


def cell_text(cell: Cell) -> str:
    """Return one cell as text.

    Parameters
    ----------
    cell : str, int, float, bool or None
        The cell.

    Returns
    -------
    str
        Quoted where CSV needs it.
    """
    if isinstance(cell, str):
        return _quoted(cell)
    if cell is None:
        return ""
    if isinstance(cell, bool | np.bool_):
        return "yes" if cell else "no"
    if isinstance(cell, float | np.floating):
        return "" if math.isnan(cell) else f"{cell:.6g}"
    return _quoted(str(cell))


def _quoted(text: str) -> str:
    if _TO_QUOTE.search(text):
        return '"' + text.replace('"', '""') + '"'
    return text


def plain(text: str) -> str:
    """Return text with ordinary spaces, for tables and terminals.

    Parameters
    ----------
    text : str
        What to say.

    Returns
    -------
    str
        Without no-break and thin spaces.
    """
    return text.replace("\u00a0", " ").replace("\u202f", " ")
