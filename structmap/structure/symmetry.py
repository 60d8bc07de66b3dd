"""Whether a file holds a crystal, and which cell and operators it has."""

import math
import re

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.errors import NonsenseCellError, UnknownSymmetryError
from structmap.structure.files import ParsedFile
from structmap.structure.record import Crystal

TWENTY_FOURTHS = 24
LEAST_VOLUME_PER_ATOM = 3.0  # Å^3
LEAST_TRANSLATION_ANGSTROM = 1.0
MOST_OPERATORS = 192  # of F m -3 m, with centring
NO_GROUP_REASON = "the operators that the file lists are no group"
SYMMETRY_LOOPS = (
    "_symmetry_equiv.pos_as_xyz",
    "_symmetry_equiv_pos_as_xyz",
    "_space_group_symop.operation_xyz",
    "_space_group_symop_operation_xyz",
)


def find_crystal(parsed: ParsedFile) -> tuple[Crystal | None, str]:
    """Return the crystal of a file, or the reason why it holds none.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.

    Returns
    -------
    crystal : Crystal or None
        Cell and operators.
    reason : str
        Words that can follow "because"; blank for a crystal. Operators of a file
        without a known space group that generate more than any group has make no
        crystal.

    Raises
    ------
    NonsenseCellError
        If no crystal can have the cell.
    UnknownSymmetryError
        If there is a cell but neither a known space group nor a list of operators.

    Notes
    -----
    The method decides before the cell: files of NMR and electron microscopy carry
    cells that mean nothing. A cell of 1 x 1 x 1 Å is the archive's placeholder.
    """
    reason = _reason_in_method(parsed.content.info)
    cell = parsed.content.cell
    if reason:
        return None, reason
    if _states_no_cell(cell):
        return None, "the file states no unit cell"
    _check_cell(parsed)
    crystal = _make_crystal(parsed)
    return crystal, "" if crystal is not None else NO_GROUP_REASON


def stated_operators(parsed: ParsedFile) -> list[gemmi.Op]:
    """Return the symmetry operators that a file lists itself.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.

    Returns
    -------
    list of gemmi.Op
        From REMARK 290 or the loop of symmetry operators; empty where there is none.
    """
    if parsed.format == gemmi.CoorFormat.Pdb:
        pattern = re.compile(r"^REMARK 290 +\d+555 +(\S+,\S+,\S+)\s*$", re.MULTILINE)
        triplets = pattern.findall(parsed.text)
    else:
        triplets = _loop_of_operators(parsed)
    try:
        return [gemmi.Op(triplet).wrap() for triplet in triplets]
    except (ValueError, RuntimeError):
        return []


def _loop_of_operators(parsed: ParsedFile) -> list[str]:
    read = (
        gemmi.cif.read_mmjson_string
        if parsed.format == gemmi.CoorFormat.Mmjson
        else gemmi.cif.read_string
    )
    block = read(parsed.text)[0]
    for tag in SYMMETRY_LOOPS:
        column = [gemmi.cif.as_string(value) for value in block.find_values(tag)]
        if column:
            return column
    return []


def _reason_in_method(info: gemmi.InfoMap) -> str:
    method = info["_exptl.method"].upper() if "_exptl.method" in info else ""
    if "DIFFRACTION" in method or "CRYSTALLOGRAPHY" in method:
        return ""
    for word, reason in (
        ("NMR", "the structure is from NMR"),
        ("MICROSCOPY", "the structure is from electron microscopy"),
        ("SCATTERING", "the structure is from scattering in solution"),
        ("THEORETICAL", "the structure is a theoretical model"),
        ("EPR", "the structure is from EPR"),
    ):
        if word in method:
            return reason
    return ""


def _states_no_cell(cell: gemmi.UnitCell) -> bool:
    return (cell.a, cell.b, cell.c) == (1.0, 1.0, 1.0)


def _check_cell(parsed: ParsedFile) -> None:
    lengths, angles = (
        parsed.content.cell.parameters[:3],
        parsed.content.cell.parameters[3:],
    )
    text = " ".join(f"{number:g}" for number in (*lengths, *angles))
    problem = ""
    if not all(math.isfinite(length) and length > 0 for length in lengths):
        problem = "has a length that is not above 0"
    elif not all(0 < angle < 180 for angle in angles):
        problem = "has an angle that is not between 0 and 180 degrees"
    elif not parsed.content.cell.volume > 0:
        problem = "has angles that do not close to a body"
    if problem:
        raise NonsenseCellError(parsed.path, text, problem)


def _make_crystal(parsed: ParsedFile) -> Crystal | None:
    structure = parsed.content
    group = structure.find_spacegroup()
    operators = list(group.operations()) if group else stated_operators(parsed)
    if not operators:
        raise UnknownSymmetryError(parsed.path, structure.spacegroup_hm)
    operators = _closed([operator.wrap() for operator in operators])
    if not operators:
        return None
    group = group or gemmi.find_spacegroup_by_ops(gemmi.GroupOps(operators))
    operators.sort(key=lambda operator: operator != gemmi.Op())
    cell = structure.cell
    a, b, c, alpha, beta, gamma = cell.parameters
    return Crystal(
        cell=(a, b, c, alpha, beta, gamma),
        space_group=_symbol(group) if group else structure.spacegroup_hm,
        orthogonalisation=np.array(cell.orth.mat.tolist()),
        orthogonalisation_shift=np.array(cell.orth.vec.tolist()),
        fractionalisation=np.array(cell.frac.mat.tolist()),
        fractionalisation_shift=np.array(cell.frac.vec.tolist()),
        rotations=_rotations(operators),
        translations=np.array([operator.tran for operator in operators]),
        triplets=tuple(operator.triplet() for operator in operators),
    )


def _symbol(group: gemmi.SpaceGroup) -> str:
    if group.ext == "H":
        return f"H{group.hm[1:]}"  # as the archive writes hexagonal axes
    return group.xhm()


def _rotations(operators: list[gemmi.Op]) -> NDArray[np.int64]:
    rotations = np.array([operator.rot for operator in operators])
    return np.asarray(rotations // TWENTY_FOURTHS, dtype=np.int64)


def _closed(operators: list[gemmi.Op]) -> list[gemmi.Op]:
    """Return the group that operators generate; empty when it is too large for one.

    Files with an unusual name list every operator; where one was lost, the others give
    it back.
    """
    group = {operator.triplet(): operator for operator in (gemmi.Op(), *operators)}
    waiting = list(group.values())
    while waiting:
        newest = waiting.pop()
        for operator in operators:
            product = (newest * operator).wrap()
            if product.triplet() not in group:
                group[product.triplet()] = product
                waiting.append(product)
        if len(group) > MOST_OPERATORS:
            return []
    return list(group.values())


def is_too_small(parsed: ParsedFile, crystal: Crystal, n_atoms: int) -> bool:
    """Tell whether a molecule in a cell must overlap with its own images.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    crystal : Crystal
        Cell and operators.
    n_atoms : int
        Atoms that each operator moves.

    Returns
    -------
    bool
        Less than 3 Å³ for each atom (diamond has 5.7), or a translation of the lattice
        that is shorter than 1 Å.
    """
    cell = parsed.content.cell
    if cell.volume < LEAST_VOLUME_PER_ATOM * len(crystal.triplets) * n_atoms:
        return True
    group = parsed.content.find_spacegroup() or gemmi.SpaceGroup("P 1")
    reduced = gemmi.GruberVector(cell, group)
    reduced.niggli_reduce()
    return bool(reduced.get_cell().a < LEAST_TRANSLATION_ANGSTROM)


def check_cell_against_group(parsed: ParsedFile, crystal: Crystal) -> list[str]:
    """Return warnings about a cell that does not fit its space group.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    crystal : Crystal
        Cell and operators.

    Returns
    -------
    list of str
        One sentence each.
    """
    warnings = []
    group = parsed.content.find_spacegroup()
    if group and not parsed.content.cell.is_compatible_with_spacegroup(group):
        cell = " ".join(f"{number:g}" for number in crystal.cell)
        warnings.append(
            f"The unit cell {cell} does not have the symmetry of {crystal.space_group}."
        )
    stated = {operator.triplet() for operator in stated_operators(parsed)}
    if stated and group is None and stated != set(crystal.triplets):
        warnings.append(
            f"The {len(stated)} operators listed in the file are no group; the "
            f"{len(crystal.triplets)} that they generate are used."
        )
    elif stated and stated != set(crystal.triplets):
        warnings.append(
            f"The operators listed in the file are not those of {crystal.space_group}; "
            "those of the space group are used."
        )
    return warnings
