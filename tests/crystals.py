"""Crystals moved, turned, expanded and thinned, for laws that contacts must obey."""

import dataclasses
from pathlib import Path

import numpy as np

from structmap.contacts import Contacts, image_matrix, make_group_table
from structmap.structure import ChainCopy, Crystal, Structure

DATA = Path(__file__).parent / "data"


def edges_of_contacts(structure: Structure, contacts: Contacts) -> dict:
    """Contacts as the brute force names them: residues, triplet, shift."""
    triplets = structure.crystal.triplets
    return {
        (int(a), int(b), triplets[k], tuple(n)): (float(d), int(count))
        for a, b, k, n, d, count in zip(
            contacts.residue_1,
            contacts.residue_2,
            contacts.operator,
            contacts.shift.tolist(),
            contacts.distance_angstrom,
            contacts.n_atom_pairs,
            strict=True,
        )
    }


def apply(matrix: np.ndarray, position: np.ndarray) -> np.ndarray:
    return position @ matrix[:3, :3].T + matrix[:3, 3]


def moved(structure: Structure, matrix: np.ndarray) -> Structure:
    """The same crystal listed by another copy; assemblies move with the molecule."""
    back = np.linalg.inv(matrix)
    return dataclasses.replace(
        structure,
        position=apply(matrix, structure.position),
        assemblies=tuple(
            dataclasses.replace(item, matrices=matrix @ item.matrices @ back)
            for item in structure.assemblies
        ),
    )


def turned_frame(structure: Structure, matrix: np.ndarray) -> Structure:
    """The same crystal in other Cartesian axes, as SCALE records can state them."""
    crystal = structure.crystal
    back = np.linalg.inv(matrix)
    turn, move = matrix[:3, :3], matrix[:3, 3]
    fractional = crystal.fractionalisation @ back[:3, :3]
    crystal = dataclasses.replace(
        crystal,
        orthogonalisation=turn @ crystal.orthogonalisation,
        orthogonalisation_shift=turn @ crystal.orthogonalisation_shift + move,
        fractionalisation=fractional,
        fractionalisation_shift=crystal.fractionalisation_shift - fractional @ move,
    )
    return dataclasses.replace(moved(structure, matrix), crystal=crystal)


def as_p1(structure: Structure) -> Structure:
    """The same crystal with every operator written out as chains of its own."""
    crystal, n = structure.crystal, len(structure.crystal.triplets)
    matrices = [image_matrix(structure, k, (0, 0, 0)) for k in range(n)]
    polymer = structure.kind_of_residue == 0
    n_residues = int(polymer.sum())
    structure = only_atoms(structure, polymer[structure.residue_of_atom])
    copies = tuple(
        ChainCopy(
            auth_asym_id=f"{chain.auth_asym_id}{k}",
            label_asym_id=chain.label_asym_id,
            ncs=chain.ncs,
            ncs_matrix=chain.ncs_matrix,
            polymer_type=chain.polymer_type,
            sequence=chain.sequence,
        )
        for k in range(n)
        for chain in structure.chain_copies
    )
    block = np.repeat(np.arange(n), n_residues)
    columns = {
        name: np.tile(getattr(structure, name)[polymer], n)
        for name in (
            "kind_of_residue",
            "auth_asym_id",
            "label_asym_id",
            "auth_comp_id",
            "ins_code",
            "auth_seq_id",
            "label_seq_id",
            "secondary_structure",
        )
    }
    columns |= {
        name: np.tile(getattr(structure, name), n)
        for name in (
            "atom_name",
            "element",
            "altloc",
            "occupancy",
            "b_iso",
            "model_of_atom",
        )
    }
    own = np.tile(structure.copy_of_residue[polymer], n)
    n_atoms = len(structure.position)
    return dataclasses.replace(
        structure,
        crystal=first_operator_only(crystal),
        chain_copies=copies,
        assemblies=(),
        copy_of_residue=own + block * len(structure.chain_copies),
        original_residue=np.arange(n * n_residues),
        position=np.concatenate([apply(m, structure.position) for m in matrices]),
        residue_of_atom=np.tile(structure.residue_of_atom, n)
        + np.repeat(np.arange(n), n_atoms) * n_residues,
        **columns,
    )


def first_operator_only(crystal: Crystal) -> Crystal:
    return dataclasses.replace(
        crystal,
        space_group="P 1",
        rotations=crystal.rotations[:1],
        translations=crystal.translations[:1],
        triplets=crystal.triplets[:1],
    )


def only_atoms(structure: Structure, keep: np.ndarray) -> Structure:
    """Some of the atoms; residues stay, even without any."""
    names = ("position", "residue_of_atom", "model_of_atom", "atom_name", "element")
    names += ("altloc", "occupancy", "b_iso")
    return dataclasses.replace(
        structure, **{name: getattr(structure, name)[keep] for name in names}
    )


def n_self_inverse(structure: Structure, contacts: Contacts) -> int:
    """Contacts of a residue with its own image over an element that undoes itself."""
    table = make_group_table(structure.crystal)
    operator, shift = table.inverse(contacts.operator, contacts.shift)
    twofold = (operator == contacts.operator) & (shift == contacts.shift).all(axis=1)
    return int(np.count_nonzero(twofold & (contacts.residue_1 == contacts.residue_2)))
