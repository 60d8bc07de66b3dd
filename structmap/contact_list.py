"""The contacts of a coordinate file as a table, without anything measured."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.chemistry import find_chemistry
from structmap.contacts import (
    KINDS,
    Contacts,
    choose_assemblies,
    contact_cutoff,
    find_contacts,
    overlap_warning,
)
from structmap.plain_table import Cell, Table
from structmap.quotient import assembly_extent, extent_sentence
from structmap.settings import Settings
from structmap.structure import LOW_CONFIDENCE, Structure, read_structure

Progress = Callable[[str, float], None]


def list_contacts(
    coordinates: Path | str, settings: Settings, *, progress: Progress | None = None
) -> tuple[Table, tuple[str, ...]]:
    """List the residue contacts over the crystal.

    Parameters
    ----------
    coordinates : Path or str
        Coordinate file.
    settings : Settings
        Every choice of the analysis.
    progress : callable, optional
        Called with the name of a step and the share done.

    Returns
    -------
    table : Table
        As ``contacts.csv``.
    notes : tuple of str
        Counts by kind, what the kinds rest on, what is odd about the file.

    Raises
    ------
    StructmapError
        If the file cannot be used.
    """
    if progress is not None:
        progress("finding contacts over the crystal", 0.0)
    structure = read_structure(Path(coordinates), model=settings.coordinate_model)
    assemblies = choose_assemblies(structure, settings.assembly)
    reach = contact_cutoff(
        structure,
        cutoff_angstrom=settings.cutoff_angstrom,
        ca_cutoff_angstrom=settings.ca_cutoff_angstrom,
    )
    found = find_contacts(structure, reach_angstrom=reach, assemblies=assemblies)
    counts = ", ".join(
        f"{(found.kind == k).sum()} {kind}" for k, kind in enumerate(KINDS)
    )
    notes = [f"{len(found.kind)} residue contacts: {counts}"]
    if structure.crystal is None:
        notes.append(f"no lattice contacts, because {structure.no_crystal_reason}")
    if found.weak.any():
        notes.append(
            f"{found.weak.sum()} contacts are weak: a residue was predicted with a "
            f"confidence below {LOW_CONFIDENCE:g}"
        )
    names = ", ".join(
        f"{a.name} ({a.oligomer})" if a.oligomer else a.name for a in assemblies
    )
    notes.append(f"assemblies that make contacts complex: {names or 'none stated'}")
    chemistry = find_chemistry(structure, found, assemblies=assemblies).text
    table = contacts_table(structure, found, chemistry=chemistry)
    odd = [overlap_warning(structure, found)]
    if assemblies:
        odd.append(extent_sentence(assembly_extent(structure, found)))
    return table, (*notes, *structure.warnings, *filter(None, odd))


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
