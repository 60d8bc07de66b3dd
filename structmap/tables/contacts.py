"""``contacts.csv``: a row for each residue contact of the crystal."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import KINDS, Contacts
from structmap.structure import Structure
from structmap.tables.text import Cell, Table


def contacts_table(
    structure: Structure, contacts: Contacts, *, chemistry: NDArray[np.str_]
) -> Table:
    """Return a row for each residue contact of the crystal.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Of that structure.
    chemistry : ndarray of str, shape (n_contacts,)
        What each contact is made of.

    Returns
    -------
    Table
        ``contacts.csv``.
    """
    own = ("auth_asym_id", "auth_seq_id", "pdbx_PDB_ins_code", "auth_comp_id")
    columns = (
        *(f"{name}_1" for name in own),
        *(f"{name}_2" for name in own),
        *("kind", "operator", "shift_a", "shift_b", "shift_c", "assembly_operator"),
        *("ncs_1", "ncs_2", "distance_angstrom", "atom_1", "atom_2", "chemistry"),
    )
    first = _residue_columns(structure, contacts.residue_1)
    second = _residue_columns(structure, contacts.residue_2)
    crystal = structure.crystal
    triplets = [""] if crystal is None else [*crystal.triplets, ""]
    rows = zip(
        *first[:4],
        *second[:4],
        [KINDS[kind] for kind in contacts.kind],
        [triplets[operator] for operator in contacts.operator],
        *contacts.shift.T.tolist(),
        contacts.assembly_operator.tolist(),
        first[4],
        second[4],
        [f"{distance:.3f}" for distance in contacts.distance_angstrom],
        structure.atom_name[contacts.atom_1].tolist(),
        structure.atom_name[contacts.atom_2].tolist(),
        chemistry.tolist(),
        strict=True,
    )
    return Table(columns=columns, rows=tuple(rows))


def _residue_columns(
    structure: Structure, residue: np.ndarray[Any, Any]
) -> list[list[Cell]]:
    ncs = np.array([copy.ncs for copy in structure.chain_copies])
    return [
        structure.auth_asym_id[residue].tolist(),
        structure.auth_seq_id[residue].tolist(),
        structure.ins_code[residue].tolist(),
        structure.auth_comp_id[residue].tolist(),
        ncs[structure.copy_of_residue[residue]].tolist(),
    ]
