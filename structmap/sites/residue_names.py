"""Whether a table and the coordinates name the same residue."""

from structmap.structure import one_letter

UNKNOWN = "X"
# Names of protonation and bonding states in common molecular mechanics force fields;
# common practice, no source.
_FORCE_FIELD_NAMES = {
    "ASH": "D",
    "CYM": "C",
    "CYX": "C",
    "GLH": "E",
    "HID": "H",
    "HIE": "H",
    "HIP": "H",
    "HSD": "H",
    "HSE": "H",
    "HSP": "H",
    "LYN": "K",
}


def letter_of(name: str) -> str:
    """Return the one-letter code of a residue as a table or a file names it.

    Parameters
    ----------
    name : str
        One letter, or the name of a component; upper case.

    Returns
    -------
    str
        ``X`` when it stands for nothing known or is blank.
    """
    if len(name) == 1:
        return name
    return _FORCE_FIELD_NAMES.get(name) or (one_letter(name) if name else UNKNOWN)


def names_agree(table_name: str, file_name: str) -> bool | None:
    """Return whether two names mean one residue, None when that cannot be told.

    Parameters
    ----------
    table_name, file_name : str
        Upper case; modified residues agree with their parents.

    Returns
    -------
    bool or None
        True, False, or None when either is unknown.
    """
    if not table_name or not file_name:
        return None
    table, file = letter_of(table_name), letter_of(file_name)
    if table_name == file_name:
        return True
    return None if UNKNOWN in (table, file) else table == file
