"""Names of columns: what each of them stands for."""

import re
from collections.abc import Collection, Sequence
from typing import Literal, NamedTuple

SiteRole = Literal[
    "auth_seq_id", "auth_asym_id", "pdbx_PDB_ins_code", "auth_comp_id", "atom", "group"
]
_ALIASES: dict[str, SiteRole] = {
    "auth_seq_id": "auth_seq_id",
    "residue": "auth_seq_id",
    "resid": "auth_seq_id",
    "res": "auth_seq_id",
    "resi": "auth_seq_id",
    "resnum": "auth_seq_id",
    "res_num": "auth_seq_id",
    "resno": "auth_seq_id",
    "residue_number": "auth_seq_id",
    "seq_id": "auth_seq_id",
    "auth_asym_id": "auth_asym_id",
    "chain": "auth_asym_id",
    "chain_id": "auth_asym_id",
    "asym_id": "auth_asym_id",
    "pdbx_pdb_ins_code": "pdbx_PDB_ins_code",
    "ins_code": "pdbx_PDB_ins_code",
    "icode": "pdbx_PDB_ins_code",
    "auth_comp_id": "auth_comp_id",
    "comp_id": "auth_comp_id",
    "resname": "auth_comp_id",
    "res_name": "auth_comp_id",
    "residue_name": "auth_comp_id",
    "aa": "auth_comp_id",
    "atom": "atom",
    "atom_id": "atom",
    "auth_atom_id": "atom",
    "atom_name": "atom",
    "group": "group",
}
NUMBER_NAMES = frozenset(
    name for name, role in _ALIASES.items() if role == "auth_seq_id"
)
_UNIT = re.compile(
    r"(?P<name>.*?)\s*(?:\[(?P<square>[^\]]*)\]|\((?P<round>[^)\d][^)]*)\))"
)
_ERROR = re.compile(
    r"(?:(?P<base>.*?)[ _.\-]+)?(?:error|err|sd|std|stderr)", re.IGNORECASE
)
_POINT = re.compile(
    r"(?P<stem>.*[A-Za-z].*?)[ _@\-]+(?P<x>\d+(?:\.\d+)?) ?"
    r"(?P<unit>kHz|Hz|ms|us|µs|μs|ns|s|min|h|nM|uM|µM|μM|mM|M|K|C|°C)?"
)


class ColumnName(NamedTuple):
    """The parts of the name of a measured column.

    Attributes
    ----------
    name : str
        Without unit and error suffix (``R1rho_5kHz``); blank for a bare ``error``.
    unit : str
        From the brackets; blank without them.
    is_error : bool
    stem : str
        Name without what looks like the x of a profile's point (``R1rho``); the whole
        name when nothing does.
    x : float or None
    x_unit : str
        Blank when the header gives no unit.
    """

    name: str
    unit: str
    is_error: bool
    stem: str
    x: float | None
    x_unit: str


def site_role(name: str) -> SiteRole | None:
    """Return what a column says of the site, None for a measured column.

    Parameters
    ----------
    name : str
        Any case, blanks or underscores.

    Returns
    -------
    str or None
        Its role, in the words of the coordinate format.
    """
    return _ALIASES.get(_plain(name))


def find_column(header: Sequence[str], names: Collection[str]) -> int:
    """Return the first column that has one of some names, -1 when none has.

    Parameters
    ----------
    header : sequence of str
        Any case, blanks or underscores.
    names : collection of str
        Lower case, underscores.

    Returns
    -------
    int
        Index of the column.
    """
    return next((n for n, name in enumerate(header) if _plain(name) in names), -1)


def _plain(name: str) -> str:
    return re.sub(r"[ \-]+", "_", name.strip().lower())


def split_unit(name: str) -> tuple[str, str]:
    """Return a column name and the unit in its brackets.

    Parameters
    ----------
    name : str
        Such as ``R1rho [s-1]``. Round brackets count when they hold no number in
        front, so that ``R1 (600 MHz)`` stays a name.

    Returns
    -------
    tuple of str
        Name and unit; the unit is blank when there is none.
    """
    found = _UNIT.fullmatch(name.strip())
    if found is None or not found["name"]:
        return name.strip(), ""
    return found["name"], (found["square"] or found["round"] or "").strip()


def split_name(header: str) -> ColumnName:
    """Take the name of a measured column apart.

    Parameters
    ----------
    header : str
        Such as ``R1rho_5kHz_error [s-1]``.

    Returns
    -------
    ColumnName
        Its parts.
    """
    name, unit = split_unit(header)
    error = _ERROR.fullmatch(name)
    name = (error["base"] or "") if error else name
    name, inner = split_unit(name) if error else (name, "")
    point = _POINT.fullmatch(name)
    stem = point["stem"] if point else name
    before = _ERROR.fullmatch(stem) if point else None
    if point and before and before["base"]:  # R1rho_error_5kHz
        stem = before["base"]
        name = name.replace(point["stem"], stem, 1)
    return ColumnName(
        name,
        unit or inner,
        is_error=error is not None or bool(before and before["base"]),
        stem=stem,
        x=float(point["x"]) if point else None,
        x_unit=(point["unit"] or "") if point else "",
    )
