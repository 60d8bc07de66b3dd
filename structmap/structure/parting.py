"""Parts of ligands as residues of their own, so that contacts can be asked of them."""

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from structmap.structure.record import LIGAND_PART, POLYMER, Structure

LigandPart = tuple[int, str]
"""A ligand residue and the name of an atom of it; blank for all that is left of it."""


def part_residues(structure: Structure, parts: Sequence[LigandPart]) -> Structure:
    """Return the structure with parts of ligands as residues of their own.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    parts : sequence of (int, str)
        Ligand residues with an atom name each, or with a blank for all atoms that are
        not named; each once.

    Returns
    -------
    Structure
        The parts come right after the polymer, in the order given; ligands and waters
        move up by their number. A part belongs to the polymer chain of its name, or
        where there is none to any, whose atoms come closest to it, as its contacts tell
        whether they lie in one chain. What is not taken stays in the ligand.
    """
    if not parts:
        return structure
    n_polymer = int(np.count_nonzero(structure.kind_of_residue == POLYMER))
    source = np.array([residue for residue, _ in parts], dtype=np.int64)
    order = np.concatenate(
        [
            np.arange(n_polymer),
            source,
            np.arange(n_polymer, len(structure.kind_of_residue)),
        ]
    )
    of_part = slice(n_polymer, n_polymer + len(parts))
    columns: dict[str, Any] = {
        name: getattr(structure, name)[order] for name in _RESIDUE_COLUMNS
    }
    columns["kind_of_residue"][of_part] = LIGAND_PART
    columns["copy_of_residue"][of_part] = _chains_of(structure, source)
    columns["original_residue"] = _originals(structure, parts, n_polymer)[order]
    columns["original_residue"][of_part] = _original_parts(structure, parts, n_polymer)
    columns |= _atom_columns(structure, parts, n_polymer)
    return replace(structure, **columns)


_RESIDUE_COLUMNS = (
    *("kind_of_residue", "copy_of_residue", "auth_asym_id", "label_asym_id"),
    *("auth_comp_id", "ins_code", "auth_seq_id", "label_seq_id"),
    "secondary_structure",
)


def _originals(
    structure: Structure, parts: Sequence[LigandPart], n_polymer: int
) -> NDArray[np.int64]:
    """Return the originals by their new places."""
    original = structure.original_residue
    return np.where(original < n_polymer, original, original + len(parts))


def _original_parts(
    structure: Structure, parts: Sequence[LigandPart], n_polymer: int
) -> list[int]:
    place = {part: n_polymer + k for k, part in enumerate(parts)}
    return [
        place.get((int(structure.original_residue[residue]), atom), n_polymer + k)
        for k, (residue, atom) in enumerate(parts)
    ]


def _atom_columns(
    structure: Structure, parts: Sequence[LigandPart], n_polymer: int
) -> dict[str, NDArray[Any]]:
    """Return the columns of the atoms, sorted by model and residue again."""
    residue = structure.residue_of_atom
    moved = np.where(residue < n_polymer, residue, residue + len(parts))
    place = {part: n_polymer + k for k, part in enumerate(parts)}
    ligands = np.isin(residue, [ligand for ligand, _ in parts])
    for atom in np.flatnonzero(ligands).tolist():
        ligand, name = int(residue[atom]), str(structure.atom_name[atom])
        whole = place.get((ligand, ""), int(moved[atom]))
        moved[atom] = place.get((ligand, name), whole)
    order = np.lexsort((moved, structure.model_of_atom))
    names = ("position", "model_of_atom", "atom_name", "element", "altloc")
    columns = {
        name: getattr(structure, name)[order] for name in (*names, "occupancy", "b_iso")
    }
    return columns | {"residue_of_atom": moved[order]}


def _chains_of(structure: Structure, ligands: NDArray[np.int64]) -> list[int]:
    """Return the chain copy that each ligand belongs to."""
    first = structure.model_of_atom == structure.model_of_atom.min()
    polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
    copy = structure.copy_of_residue[structure.residue_of_atom]
    found: dict[int, int] = {}
    for ligand in np.unique(ligands).tolist():
        name = structure.auth_asym_id[ligand]
        named = structure.auth_asym_id[structure.residue_of_atom] == name
        near = first & polymer & named
        atoms = np.flatnonzero(near if near.any() else first & polymer)
        own = structure.position[first & (structure.residue_of_atom == ligand)]
        apart, closest = cKDTree(structure.position[atoms]).query(own)
        found[ligand] = int(copy[atoms[closest[np.argmin(apart)]]])
    return [found[ligand] for ligand in ligands.tolist()]


def part_atom(structure: Structure, residue: int) -> str:
    """Return the name of the atom that a part of a ligand is.

    Parameters
    ----------
    structure : Structure
        From `part_residues`.
    residue : int
        Index of a residue.

    Returns
    -------
    str
        Blank for a whole residue and for a part of several atoms.
    """
    if structure.kind_of_residue[residue] != LIGAND_PART:
        return ""
    names = np.unique(structure.atom_name[structure.residue_of_atom == residue])
    return str(names[0]) if len(names) == 1 else ""
