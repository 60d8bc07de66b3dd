"""Laying units out over images."""

from dataclasses import replace

import numpy as np
import pytest

from structmap.contacts import LATTICE, contact_matrix
from structmap.quotient import lay_out_unit
from tests.quotient.cases import archive, contacts_of, sites_of

UNIT_4CUP = [1867, 1870, 1883, 1884, 1885, 1916, *range(1918, 1923), 1924, 1952, 1955]
UNIT_4CUP += [1956, 1959, 1960, 1963]
UNIT_3WUP = [633, 644, 645, 647, 648, 651, 652, 653, 655, 656, 657, 659, 660]


def laid_out(structure, numbers, *, choice="auto", chain=""):
    sites = sites_of(structure, numbers, chain)
    members = np.arange(len(numbers))
    contacts = contacts_of(structure, choice)
    return lay_out_unit(members, structure, sites=sites, contacts=contacts)


def distances(structure, layout):
    """Shortest distances between the members where they are drawn."""
    places = []
    for residue, transform in zip(layout.residue, layout.transform, strict=True):
        own = structure.position[structure.residue_of_atom == residue]
        places.append(own @ transform[:3, :3].T + transform[:3, 3])
    gaps = [
        [np.linalg.norm(a[:, None] - b[None], axis=2).min() for b in places]
        for a in places
    ]
    return np.array(gaps)


def test_unit_held_by_the_lattice_stands_together_where_it_is_drawn(data_folder):
    structure = archive(data_folder, "4cup.cif.gz")
    found = laid_out(structure, UNIT_4CUP)
    assert found.is_reached.all()
    assert len(set(found.operator.tolist())) > 1
    touching = distances(structure, found) <= 4.5
    reached = np.linalg.matrix_power(touching.astype(int), len(UNIT_4CUP)) > 0
    assert reached.all()


def test_levels_of_a_unit_held_by_the_lattice(data_folder):
    structure = archive(data_folder, "4cup.cif.gz")
    found = laid_out(structure, UNIT_4CUP)
    assert [level.is_covered for level in found.levels] == [False, False, True]
    assert (found.closes, found.order) == ("finite", 1)


def test_unit_of_a_trimer_closes_to_a_ring_and_goes_on_in_the_crystal(data_folder):
    structure = archive(data_folder, "3wup.json.gz")
    found = laid_out(structure, UNIT_3WUP, choice="2")
    chain, both, everything = found.levels
    assert chain.is_covered
    assert (chain.closure.closes, chain.n_covering) == ("finite", 1)
    assert (both.closure.closes, both.closure.order) == ("ring", 3)
    assert (everything.closure.closes, everything.closure.order) == ("net", 12)
    # All chain contacts: it is drawn as the file has it.
    np.testing.assert_array_equal(found.operator, 0)
    np.testing.assert_array_equal(found.transform, np.tile(np.eye(4), (13, 1, 1)))


def test_copies_in_two_chains_are_drawn_once(data_folder):
    structure = archive(data_folder, "1hvr.pdb.gz")
    numbers = list(range(44, 56))
    found = laid_out(structure, numbers)
    assert found.levels[0].n_copies == 2
    assert found.levels[0].n_covering == 2
    np.testing.assert_array_equal(found.site, np.arange(12))
    assert set(structure.auth_asym_id[found.residue]) == {"A"}


def test_unit_across_the_interface_of_a_dimer_takes_both_chains(data_folder):
    """Both ends of HIV protease interleave in a sheet of four strands at the dimer.

    Common practice, no source.
    """
    structure = archive(data_folder, "1hvr.pdb.gz")
    numbers = [1, 2, 3, 95, 96, 97, 98, 99]
    found = laid_out(structure, numbers)
    assert found.is_reached.all()
    assert not found.levels[0].is_covered
    assert found.levels[1].is_covered
    assert set(structure.auth_asym_id[found.residue]) == {"A", "B"}
    assert (distances(structure, found) <= 4.5).sum(axis=1).min() > 1


def test_one_residue_in_a_short_cell_is_a_rod(data_folder):
    """5wkd has b = 4.78 Å: every strand touches its own translation along b."""
    structure = archive(data_folder, "5wkd.pdb")
    middle = int(structure.auth_seq_id[3])
    found = laid_out(structure, [middle])
    assert found.closes in ("rod", "layer")
    assert [0.0, 1.0, 0.0] in found.periods.tolist()


def test_members_apart_stay_where_the_file_has_them(data_folder):
    structure = archive(data_folder, "7cfn.cif.gz")
    chain = structure.auth_asym_id[0]
    numbers = structure.auth_seq_id[structure.auth_asym_id == chain]
    found = laid_out(structure, [int(numbers[0]), int(numbers[60])], chain=chain)
    assert found.is_reached.tolist() == [True, False]
    np.testing.assert_array_equal(found.transform[1], np.eye(4))


def test_layout_does_not_depend_on_which_copy_the_file_holds(data_folder):
    """Moving the file by a symmetry operator moves the drawing, not its shape."""
    structure = archive(data_folder, "4cup.cif.gz")
    contacts = contacts_of(structure)
    index = int(np.flatnonzero(contacts.kind == LATTICE)[0])
    move = contact_matrix(structure, contacts, index)
    moved = structure.position @ move[:3, :3].T + move[:3, 3]
    elsewhere = replace(structure, position=moved)
    here, there = laid_out(structure, UNIT_4CUP), laid_out(elsewhere, UNIT_4CUP)
    assert here.closes == there.closes
    np.testing.assert_allclose(
        distances(structure, here), distances(elsewhere, there), atol=1e-6
    )


def test_no_members_are_refused(data_folder):
    structure = archive(data_folder, "1orc.pdb")
    sites = sites_of(structure, [10])
    contacts = contacts_of(structure)
    with pytest.raises(ValueError, match="no residue"):
        lay_out_unit(np.array([3]), structure, sites=sites, contacts=contacts)
