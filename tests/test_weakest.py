"""The fewest contacts without which a unit falls apart."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from structmap.contacts import CHAIN, LATTICE, Contacts
from structmap.weakest import find_weakest_link, smallest_cut
from tests.quotient.cases import archive, contacts_of, sites_of
from tests.quotient.test_unit import UNIT_4CUP


def test_graph_of_the_publication():
    """Stoer and Wagner, J. ACM 44, 585 (1997), figure 1: the smallest cut weighs 4.

    Edges and result as quoted from memory of that figure; the brute force below
    confirms them.
    """
    edges = {(1, 2): 2, (1, 5): 3, (2, 3): 3, (2, 5): 2, (2, 6): 2, (3, 4): 4}
    edges |= {(3, 7): 2, (4, 7): 2, (4, 8): 2, (5, 6): 3, (6, 7): 1, (7, 8): 3}
    weight = np.zeros((8, 8), dtype=int)
    for (one, other), cost in edges.items():
        weight[one - 1, other - 1] = weight[other - 1, one - 1] = cost
    side = smallest_cut(weight)
    assert weight[side][:, ~side].sum() == 4 == cheapest(weight)
    parts = {frozenset(np.flatnonzero(part) + 1) for part in (side, ~side)}
    assert parts == {frozenset({3, 4, 7, 8}), frozenset({1, 2, 5, 6})}


def cheapest(weight, first=(), second=()):
    """Try every split."""
    n_nodes = len(weight)
    costs = []
    for flags in itertools.product([False, True], repeat=n_nodes):
        side = np.array(flags)
        if side.all() or not side.any():
            continue
        if not side[list(first)].all() or side[list(second)].any():
            continue
        costs.append(weight[side][:, ~side].sum())
    return min(costs)


@given(st.integers(2, 7), st.data())
def test_no_split_cuts_less(n_nodes, data):
    rows = st.lists(st.integers(0, 5), min_size=n_nodes, max_size=n_nodes)
    half = np.array([data.draw(rows) for _ in range(n_nodes)])
    weight = np.triu(half, 1) + np.triu(half, 1).T
    side = smallest_cut(weight)
    assert 0 < side.sum() < n_nodes
    assert weight[side][:, ~side].sum() == cheapest(weight)


def made_contacts(rows):
    """Contacts from (residue, residue, kind, atom pairs)."""
    first, second, kind, pairs = np.array(rows).T
    n = len(rows)
    return Contacts(
        reach_angstrom=4.5,
        residue_1=first,
        residue_2=second,
        operator=np.where(kind == LATTICE, 1, 0),
        shift=np.zeros((n, 3)),
        assembly_operator=np.full(n, ""),
        kind=kind,
        distance_angstrom=np.full(n, 3.5),
        atom_1=np.zeros(n),
        atom_2=np.zeros(n),
        n_atom_pairs=pairs,
        share_of_models=np.ones(n),
    )


# Two triangles of residues 0-2 and 3-5 joined by two contacts, one of many atoms.
BOW_TIE = made_contacts(
    [
        *((0, 1, CHAIN, 9), (0, 2, CHAIN, 9), (1, 2, CHAIN, 9), (2, 3, LATTICE, 8)),
        *((3, 4, CHAIN, 9), (3, 5, CHAIN, 9), (4, 5, CHAIN, 9), (1, 4, LATTICE, 2)),
    ]
)


class SixSites:
    copy_site = np.arange(6)
    copy_residue = np.arange(6)


def test_bridge_between_two_pieces_is_found():
    found = find_weakest_link(np.arange(6), SixSites, contacts=BOW_TIE)
    assert found.sides == ((0, 1, 2), (3, 4, 5))
    np.testing.assert_array_equal(found.contacts, [3, 7])
    assert (found.n_residue_contacts, found.n_atom_contacts) == (2, 10)


def test_groups_must_come_apart_although_a_lone_member_hangs_by_less():
    rows = zip(
        *(BOW_TIE.residue_1, BOW_TIE.residue_2, BOW_TIE.kind, BOW_TIE.n_atom_pairs),
        strict=True,
    )
    dangling = made_contacts([*rows, (5, 6, CHAIN, 1)])

    class SevenSites:
        copy_site = np.arange(7)
        copy_residue = np.arange(7)

    members = np.arange(7)
    lone = find_weakest_link(members, SevenSites, contacts=dangling)
    assert lone.sides == ((0, 1, 2, 3, 4, 5), (6,))
    pieces = find_weakest_link(
        members, SevenSites, contacts=dangling, apart=[[0, 1, 2], [3, 4, 5, 6]]
    )
    np.testing.assert_array_equal(pieces.contacts, [3, 7])


def test_atoms_and_residues_are_weighed_apart():
    """A chain of three: one contact of 20 atoms, two contacts of 1 atom to a copy."""
    contacts = made_contacts([(0, 1, 0, 20), (1, 2, 0, 1), (1, 2, 2, 1)])

    class ThreeSites:
        copy_site = np.arange(3)
        copy_residue = np.arange(3)

    by_residue = find_weakest_link(np.arange(3), ThreeSites, contacts=contacts)
    by_atom = find_weakest_link(
        np.arange(3), ThreeSites, contacts=contacts, weigh="atoms"
    )
    np.testing.assert_array_equal(by_residue.contacts, [0])
    np.testing.assert_array_equal(by_atom.contacts, [1, 2])


def test_unit_that_is_apart_needs_no_cut():
    found = find_weakest_link(
        np.array([0, 5]), SixSites, contacts=made_contacts([(1, 2, 0, 1)])
    )
    assert found.n_residue_contacts == 0
    assert found.sides == ((0,), (5,))


@pytest.mark.parametrize("apart", [[[0]], [[0], [0, 1]], [[0], [9]], [[0], []]])
def test_groups_that_make_no_sense_are_refused(apart):
    with pytest.raises(ValueError, match="apart"):
        find_weakest_link(np.arange(6), SixSites, contacts=BOW_TIE, apart=apart)


def test_one_member_is_refused():
    with pytest.raises(ValueError, match="alone"):
        find_weakest_link(np.array([1]), SixSites, contacts=BOW_TIE)


def test_unit_held_by_the_lattice_hangs_on_lattice_contacts_alone(data_folder):
    structure = archive(data_folder, "4cup.cif.gz")
    sites, contacts = sites_of(structure, UNIT_4CUP), contacts_of(structure)
    numbers = np.array(UNIT_4CUP)
    members = np.arange(len(UNIT_4CUP))
    lattice_free = sites_pieces(members, sites, contacts)
    found = find_weakest_link(members, sites, contacts=contacts, apart=lattice_free)
    assert (contacts.kind[found.contacts] == LATTICE).all()
    assert found.n_residue_contacts == len(found.contacts) > 0
    first, second = (set(numbers[list(side)]) for side in found.sides)
    for contact in found.contacts:
        ends = contacts.residue_1[contact], contacts.residue_2[contact]
        ends = {int(structure.auth_seq_id[end]) for end in ends}
        assert ends & first
        assert ends & second


def sites_pieces(members, sites, contacts):
    """Pieces of three or more members that hold together without the lattice."""
    label = {int(site): int(site) for site in members}
    site_of = dict(
        zip(sites.copy_residue.tolist(), sites.copy_site.tolist(), strict=True)
    )
    for _ in members:
        for one, other, kind in zip(
            contacts.residue_1, contacts.residue_2, contacts.kind, strict=True
        ):
            if kind < LATTICE and int(one) in site_of and int(other) in site_of:
                a, b = site_of[int(one)], site_of[int(other)]
                label[a] = label[b] = min(label[a], label[b])
    pieces = [[s for s in label if label[s] == key] for key in set(label.values())]
    return [piece for piece in pieces if len(piece) > 2]
