"""Structures, contacts and sites that the tests of units share."""

from pathlib import Path

import numpy as np

from structmap.contacts import Contacts, choose_assemblies, find_contacts
from structmap.sites import Sites
from structmap.structure import POLYMER, Structure, read_structure

DATA = Path(__file__).parent.parent / "data"


def archive(data_folder: Path, name: str) -> Structure:
    committed = DATA / name
    return read_structure(
        committed if committed.exists() else data_folder / "archive" / name
    )


def contacts_of(
    structure: Structure, choice: str = "auto", reach_angstrom: float = 4.5
) -> Contacts:
    return find_contacts(
        structure,
        reach_angstrom=reach_angstrom,
        assemblies=choose_assemblies(structure, choice),
    )


def sites_of(structure: Structure, numbers: list[int], chain: str = "") -> Sites:
    """Sites by residue number; chains of that number are copies of one site."""
    polymer = structure.kind_of_residue == POLYMER
    if chain:
        polymer = polymer & (structure.auth_asym_id == chain)
    copies = [
        np.flatnonzero(polymer & (structure.auth_seq_id == number))
        for number in numbers
    ]
    n_sites = len(numbers)
    return Sites(
        name=np.array([str(number) for number in numbers]),
        row=np.arange(n_sites),
        residue=np.array([own[0] for own in copies]),
        atom=np.full(n_sites, ""),
        copy_site=np.repeat(np.arange(n_sites), [len(own) for own in copies]),
        copy_residue=np.concatenate(copies),
        chains=(),
        mismatches=(),
        unmatched=(),
        notes=(),
    )
