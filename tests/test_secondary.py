import dataclasses

import numpy as np
import pytest

from structmap.secondary import (
    BOND_ENERGY,
    _chain_segments,
    _hydrogen_bonds,
    assign_secondary_structure,
)
from structmap.structure import POLYMER, read_structure
from tests.crystals import DATA, apply, only_atoms

# Least share of residues that must agree with the HELIX and SHEET records of the file.
# Records reach one residue farther at the ends than the rule does, and those of 1UBI
# were set by its authors.
AGREEMENT = {
    "1orc.pdb": 0.95,
    "4cup.cif.gz": 0.88,
    "1gbt.cif.gz": 0.93,
    "4zhl.cif.gz": 0.93,
    "pdb1ubi.pdb": 0.85,
}


@pytest.mark.parametrize("name", AGREEMENT)
def test_agrees_with_the_records_of_the_file(name):
    structure = read_structure(DATA / name)
    polymer = structure.kind_of_residue == POLYMER
    recorded = structure.secondary_structure[polymer]
    found = assign_secondary_structure(structure)[polymer]
    assert set(found.tolist()) <= {"H", "E", ""}
    assert (found == recorded).mean() >= AGREEMENT[name]
    # A helix is not taken for a strand.
    swapped = (found != recorded) & (found != "") & (recorded != "")
    assert swapped.sum() <= 1  # residue 40 of 1UBI ends a 3-10 helix


def test_ca_atoms_alone_show_most_of_it():
    structure = read_structure(DATA / "1orc.pdb")
    ca = only_atoms(structure, structure.atom_name == "CA")
    found = assign_secondary_structure(dataclasses.replace(ca, ca_only=True))
    polymer = structure.kind_of_residue == POLYMER
    recorded = structure.secondary_structure[polymer]
    assert (found[polymer] == recorded).mean() >= 0.85
    swapped = (found[polymer] != "") & (recorded != "") & (found[polymer] != recorded)
    assert not swapped.any()


def test_hydrogen_bonds_are_those_of_the_published_energy():
    # Kabsch and Sander, Biopolymers 22, 2577 (1983), residue by residue.
    structure = read_structure(DATA / "1orc.pdb")
    place = {}
    for residue, name, xyz in zip(
        structure.residue_of_atom, structure.atom_name, structure.position, strict=True
    ):
        place.setdefault((int(residue), str(name)), xyz)
    n = int((structure.kind_of_residue == POLYMER).sum())

    def energy(giver, taker):
        before = place[giver - 1, "C"] - place[giver - 1, "O"]
        h = place[giver, "N"] + 1.01 * before / np.linalg.norm(before)
        c, o = place[taker, "C"], place[taker, "O"]
        nitrogen = place[giver, "N"]
        ends = (o, nitrogen), (c, h), (o, h), (c, nitrogen)
        r = [np.linalg.norm(one - two) for one, two in ends]
        return 332 * 0.42 * 0.20 * (1 / r[0] + 1 / r[1] - 1 / r[2] - 1 / r[3])

    expected = {
        (taker, giver)
        for giver in range(1, n)
        for taker in range(n)
        if giver - taker not in (0, 1)
        and structure.auth_comp_id[giver] != "PRO"
        and energy(giver, taker) < BOND_ENERGY
    }
    bonds = _hydrogen_bonds(structure, _chain_segments(structure))
    found = zip(bonds.acceptor.tolist(), bonds.donor.tolist(), strict=True)
    assert set(found) == expected
    assert len(expected) > 30


def test_does_not_change_when_the_molecule_turns():
    structure = read_structure(DATA / "1gbt.cif.gz")
    matrix = np.eye(4)
    matrix[:3, :3] = [[0, 0, 1], [0.6, 0.8, 0], [-0.8, 0.6, 0]]
    matrix[:3, 3] = (10, 20, -5)
    turned = dataclasses.replace(structure, position=apply(matrix, structure.position))
    np.testing.assert_array_equal(
        assign_secondary_structure(turned), assign_secondary_structure(structure)
    )


def test_a_gap_in_the_chain_breaks_a_helix():
    structure = read_structure(DATA / "4cup.cif.gz")
    whole = assign_secondary_structure(structure)
    middle = 80
    assert (whole[middle - 4 : middle + 5] == "H").all()
    gap = np.arange(middle - 3, middle + 3)
    found = assign_secondary_structure(
        only_atoms(structure, ~np.isin(structure.residue_of_atom, gap))
    )
    assert (found[gap] == "").all()
    assert (found[:40] == whole[:40]).all()


@pytest.mark.parametrize("name", ["1pfe.cif.gz", "1as5.cif.gz", "4hhh_frag.pdb"])
def test_what_has_none_gets_none(name):
    structure = read_structure(DATA / name)
    found = assign_secondary_structure(structure)
    assert len(found) == len(structure.kind_of_residue)
    assert (found == "").all()
