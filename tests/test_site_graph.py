"""The graph of measured sites against a plain loop over contacts and copies."""

import numpy as np
import pytest

from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    Contacts,
    choose_assemblies,
    find_contacts,
    make_site_graph,
)
from structmap.sites import Sites
from structmap.structure import read_structure
from tests.crystals import DATA


def made_sites(copies, n_sites):
    """Sites from pairs (site, residue)."""
    copies = sorted(copies)
    first = np.full(n_sites, -1)
    for site, residue in reversed(copies):
        first[site] = residue
    return Sites(
        name=np.array([f"S{k}" for k in range(n_sites)]),
        row=np.arange(n_sites),
        residue=first,
        atom=np.full(n_sites, ""),
        copy_site=np.array([site for site, _ in copies], dtype=np.int64),
        copy_residue=np.array([residue for _, residue in copies], dtype=np.int64),
        chains=(),
        mismatches=(),
        unmatched=(),
        notes=(),
    )


def made_contacts(rows):
    """Contacts from rows (residue, residue, kind, distance)."""
    n = len(rows)
    return Contacts(
        reach_angstrom=10.0,
        residue_1=np.array([row[0] for row in rows]),
        residue_2=np.array([row[1] for row in rows]),
        operator=np.zeros(n),
        shift=np.zeros((n, 3)),
        assembly_operator=np.full(n, ""),
        kind=np.array([row[2] for row in rows]),
        distance_angstrom=np.array([row[3] for row in rows]),
        atom_1=np.zeros(n),
        atom_2=np.zeros(n),
        n_atom_pairs=np.ones(n),
        share_of_models=np.ones(n),
    )


def edges(graph):
    return {
        (int(a), int(b)): (int(kind), float(distance))
        for a, b, kind, distance in zip(
            graph.site_1,
            graph.site_2,
            graph.kind,
            graph.distance_angstrom,
            strict=True,
        )
    }


def test_copies_collapse_to_the_closest_relation_and_the_shortest_distance():
    # Site 0 on residues 0 and 10, site 1 on 1 and 11: touching in the chain at 4.2 and
    # across the lattice at 3.0.
    sites = made_sites([(0, 0), (0, 10), (1, 1), (1, 11)], 2)
    contacts = made_contacts([(0, 11, LATTICE, 3.0), (10, 11, CHAIN, 4.2)])
    assert edges(make_site_graph(contacts, sites, cutoff_angstrom=4.5)) == {
        (0, 1): (CHAIN, 3.0)
    }
    assert edges(make_site_graph(contacts, sites, cutoff_angstrom=4.0)) == {
        (0, 1): (LATTICE, 3.0)
    }


def test_a_site_touching_its_own_image_or_copy_is_no_edge():
    sites = made_sites([(0, 0), (0, 10)], 1)
    contacts = made_contacts([(0, 0, LATTICE, 3.0), (0, 10, COMPLEX, 3.0)])
    graph = make_site_graph(contacts, sites, cutoff_angstrom=4.5)
    assert edges(graph) == {}
    assert graph.n_sites == 1


def test_sites_on_one_residue_are_joined_and_share_its_contacts():
    sites = made_sites([(0, 5), (1, 5), (2, 6)], 4)
    contacts = made_contacts([(5, 6, CHAIN, 1.3), (5, 5, LATTICE, 3.5)])
    graph = make_site_graph(contacts, sites, cutoff_angstrom=4.5)
    assert edges(graph) == {
        (0, 1): (CHAIN, 0.0),
        (0, 2): (CHAIN, 1.3),
        (1, 2): (CHAIN, 1.3),
    }
    assert graph.n_sites == 3  # the fourth has no residue


def test_a_site_without_a_residue_leaves_the_numbers_of_the_others():
    # Another form of the protein may lack the residue of an earlier site.
    contacts = made_contacts([(5, 6, CHAIN, 1.3)])
    graph = make_site_graph(
        contacts, made_sites([(1, 5), (2, 6)], 3), cutoff_angstrom=4.5
    )
    assert edges(graph) == {(1, 2): (CHAIN, 1.3)}
    assert graph.n_sites == 3


def test_no_sites_and_no_contacts_make_an_empty_graph():
    nothing = made_contacts([])
    graph = make_site_graph(nothing, made_sites([], 2), cutoff_angstrom=4.5)
    assert edges(graph) == {}
    assert graph.n_sites == 0
    pair = made_sites([(0, 3), (1, 900)], 2)
    assert edges(make_site_graph(nothing, pair, cutoff_angstrom=4.5)) == {}


@pytest.mark.parametrize(("name", "cutoff"), [("1a28.pdb.gz", 4.5), ("4oz7.pdb", 4.0)])
def test_equals_a_loop_over_contacts_and_copies(name, cutoff):
    """Both chains of a homodimer carry the same sites; some are measured twice."""
    structure = read_structure(DATA / name)
    contacts = find_contacts(
        structure, reach_angstrom=6.0, assemblies=choose_assemblies(structure, "auto")
    )
    numbers = np.unique(structure.auth_seq_id[structure.copy_of_residue >= 0])
    site_of_number = {int(number): 2 * k for k, number in enumerate(numbers)}
    copies = []
    for residue in np.flatnonzero(structure.copy_of_residue >= 0).tolist():
        site = site_of_number[int(structure.auth_seq_id[residue])]
        copies.append((site, residue))
        if site % 3 == 0:
            copies.append((site + 1, residue))
    sites = made_sites(copies, 2 * len(numbers))
    on_residue = {}
    for site, residue in copies:
        on_residue.setdefault(residue, []).append(site)
    expected = {
        (here[0], here[1]): (CHAIN, 0.0)
        for here in on_residue.values()
        if len(here) == 2
    }
    for a, b, kind, distance in zip(
        contacts.residue_1.tolist(),
        contacts.residue_2.tolist(),
        contacts.kind.tolist(),
        contacts.distance_angstrom.tolist(),
        strict=True,
    ):
        if distance > cutoff:
            continue
        for one in on_residue[a]:
            for other in on_residue[b]:
                pair = min(one, other), max(one, other)
                if one != other:
                    closest = expected.get(pair, (LATTICE, np.inf))
                    expected[pair] = min(closest[0], kind), min(closest[1], distance)
    graph = make_site_graph(contacts, sites, cutoff_angstrom=cutoff)
    assert edges(graph) == expected
    order = np.lexsort((graph.site_2, graph.site_1))
    np.testing.assert_array_equal(order, np.arange(len(graph.site_1)))
