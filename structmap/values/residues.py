"""Cells of a table: residue numbers and measured numbers."""

import math
import re
from pathlib import Path
from typing import NamedTuple

from structmap.values.errors import UnreadableCellError

MISSING = frozenset({"", "na", "n/a", "#n/a", "nan", "null", "none"})
_LARGEST_NUMBER = 1_000_000
_RESIDUE = re.compile(
    r"(?:(?P<chain>[A-Za-z0-9]+)[/:])?"
    r"(?:(?P<comp>[A-Za-z]{3}|[A-Za-z]) ?(?=\d))?"  # a dash there could be a minus
    r"(?P<number>[+-]?\d+)(?:\.0+)?(?P<ins>[A-Za-z]?)"
)
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


class ResidueNumber(NamedTuple):
    """A residue as a cell names it.

    Attributes
    ----------
    chain : str
        Blank unless written before the number (``A/56``).
    comp : str
        Name of one or three letters before the number (``LYS56``), upper case.
    number : int
    ins_code : str
        Letter after the number (``56A``).
    """

    chain: str
    comp: str
    number: int
    ins_code: str


def is_missing(cell: str) -> bool:
    """Return whether a cell stands for a value that is missing.

    Parameters
    ----------
    cell : str
        Text of the cell.

    Returns
    -------
    bool
        True for a blank, ``NA``, ``nan`` and the like.
    """
    return cell.lower() in MISSING


def is_residue_number(cell: str) -> bool:
    """Return whether a cell can be read as a residue number.

    Parameters
    ----------
    cell : str
        Text of the cell.

    Returns
    -------
    bool
        True when `parse_residue` can read it.
    """
    return _RESIDUE.fullmatch(_plain_minus(cell)) is not None


def parse_residue(cell: str, *, path: Path, row: int, column: str) -> ResidueNumber:
    """Read a residue number with what may be written together with it.

    Parameters
    ----------
    cell : str
        ``56``, ``56A``, ``-3``, ``A/56A`` or ``LYS56``.
    path : Path
        For the message.
    row : int
        For the message.
    column : str
        For the message.

    Returns
    -------
    ResidueNumber
        Number, with chain, name and code where written.

    Raises
    ------
    UnreadableCellError
        If it is none.
    """
    found = _RESIDUE.fullmatch(_plain_minus(cell))
    if found is None or abs(int(found["number"])) > _LARGEST_NUMBER:
        wanted = (
            "write a residue number, with its insertion code if any, as in 56 or 56A"
        )
        raise UnreadableCellError(path, row, column, cell, wanted)
    return ResidueNumber(
        found["chain"] or "",
        (found["comp"] or "").upper(),
        int(found["number"]),
        found["ins"],
    )


def parse_number(cell: str, *, path: Path, row: int, column: str) -> float:
    """Read a measured number.

    Parameters
    ----------
    cell : str
        Text of the cell.
    path : Path
        For the message.
    row : int
        For the message.
    column : str
        For the message.

    Returns
    -------
    float
        NaN where the value is missing.

    Raises
    ------
    UnreadableCellError
        If it is text, infinite or too large.
    """
    if is_missing(cell):
        return math.nan
    plain = _plain_minus(cell)
    number = float(plain) if _NUMBER.fullmatch(plain) else math.inf
    if math.isinf(number):
        wanted = "write a number, or NA where it is missing"
        raise UnreadableCellError(path, row, column, cell, wanted)
    return number


def parse_error(cell: str, *, path: Path, row: int, column: str) -> float:
    """Read the error of a measured number.

    Parameters
    ----------
    cell : str
        Text of the cell.
    path : Path
        For the message.
    row : int
        For the message.
    column : str
        For the message.

    Returns
    -------
    float
        NaN where it is not given; 0 as it stands.

    Raises
    ------
    UnreadableCellError
        If it is negative or not a number.
    """
    number = parse_number(cell, path=path, row=row, column=column)
    if number < 0:
        wanted = "an error cannot be negative; correct it, or leave it blank"
        raise UnreadableCellError(path, row, column, cell, wanted)
    return number


def holds_a_number(cell: str) -> bool:
    """Return whether a cell is a plain number.

    Parameters
    ----------
    cell : str
        Text of the cell.

    Returns
    -------
    bool
        True for a number.
    """
    return _NUMBER.fullmatch(_plain_minus(cell)) is not None


def _plain_minus(cell: str) -> str:
    return cell.replace("\N{MINUS SIGN}", "-")
