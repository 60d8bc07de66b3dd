"""What holds a unit together, how weakly, and what that rests on."""

import dataclasses
import sys
from pathlib import Path

import numpy as np
import pytest

from structmap.analysis import analyse
from structmap.chemistry import find_chemistry
from structmap.contacts import LATTICE, choose_assemblies, contacts_where, find_contacts
from structmap.holding import (
    describe_hold,
    find_deciding_side_chains,
    poorly_ordered_atoms,
    prepare_holding,
)
from structmap.lattice import (
    judge_lattice,
    number_crystal_contacts,
    verdict_by_graph,
)
from structmap.quotient import lay_out_unit
from structmap.settings import Settings
from structmap.structure import POLYMER, read_structure
from tests.quotient.cases import sites_of

DATA = Path(__file__).parent / "data"
# The unit across crystal contacts that the example plants.
ACROSS = [1916, 1919, 1920, 1922, 1955, 1956, 1959, 1960]


def hold_of(structure, numbers, *, assembly="auto", reach=4.5):
    """Return the hold of a unit, its verdict and what they were asked of."""
    assemblies = choose_assemblies(structure, assembly)
    contacts = find_contacts(structure, reach_angstrom=reach, assemblies=assemblies)
    sites = sites_of(structure, numbers)
    held = prepare_holding(
        structure,
        sites,
        contacts=contacts,
        chemistry=find_chemistry(structure, contacts, assemblies=assemblies),
        numbered=number_crystal_contacts(structure, contacts),
        assemblies=assemblies,
    )
    members = np.arange(len(numbers))
    verdict = judge_lattice(
        members,
        held.graph,
        structure=structure,
        sites=sites,
        contacts=contacts,
        assemblies=assemblies,
    )
    return describe_hold(members, held, verdict=verdict, name="U1"), verdict, held


@pytest.fixture(scope="module")
def example():
    return hold_of(read_structure(DATA / "4cup.cif.gz"), ACROSS)


def test_a_unit_across_the_crystal_falls_apart_without_its_weakest_link(example):
    hold, verdict, held = example
    assert verdict.verdict == "lattice-joined"
    assert set(held.contacts.kind[hold.weakest.contacts]) == {LATTICE}
    keep = np.ones(len(held.contacts.kind), dtype=bool)
    keep[hold.weakest.contacts] = False
    cut = dataclasses.replace(held, contacts=contacts_where(held.contacts, keep))
    parts = [set(side) for side in hold.weakest.sides]
    for one, two in zip(cut.contacts.residue_1, cut.contacts.residue_2, strict=True):
        sites = [
            set(held.sites.copy_site[held.sites.copy_residue == r]) for r in (one, two)
        ]
        if all(sites):
            assert any(all(s <= part for s in sites) for part in parts)


def test_the_words_of_the_link_count_each_of_its_contacts_once(example):
    hold, _, _ = example
    counted = sum(count for _, count in hold.link_kinds)
    assert counted == hold.weakest.n_residue_contacts > 0
    assert set(hold.link_images) <= set(example[1].operators)
    assert hold.link_images
    assert hold.link_chains == ()


def test_ablation_counts_members_by_hand(example):
    """Without lattice contacts the two sides stand alone; each holds by its chain."""
    hold, verdict, held = example
    sizes = [len(piece) for piece in verdict.pieces_without_lattice]
    assert hold.largest_without_lattice == max(sizes) < len(ACROSS)
    touched = set()
    for index in np.flatnonzero(held.contacts.kind == LATTICE):
        ends = held.contacts.residue_1[index], held.contacts.residue_2[index]
        sites = [held.sites.copy_site[held.sites.copy_residue == r] for r in ends]
        if all(len(s) for s in sites) and sites[0][0] != sites[1][0]:
            touched |= {int(s[0]) for s in sites}
    assert 2 <= hold.largest_by_lattice_alone <= len(touched)


def test_area_across_the_contact_is_that_of_the_pair_of_residues(example):
    """Janin and Rodier, Proteins 23, 580 (1995): 200 to 1200 Å² a whole contact."""
    hold, _, _ = example
    assert 50 < hold.buried_area < 1200


def test_the_verdict_is_told_at_other_cutoffs(example):
    hold, verdict, held = example
    assert [cutoff for cutoff, _ in hold.verdict_at] == [4.0, 5.0, 6.0]
    graph = dict(held.graph_at)[6.0]
    assert verdict_by_graph(np.arange(len(ACROSS)), graph) == hold.verdict_at[2][1]
    assert hold.verdict_at[1][1] == verdict.verdict


def shortest(structure, ours, theirs):
    """Shortest distance of two sets of residues of one chain, atom by atom."""
    number = structure.auth_seq_id[structure.residue_of_atom]
    polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
    one = structure.position[np.isin(number, ours) & polymer]
    two = structure.position[np.isin(number, theirs) & polymer]
    return np.linalg.norm(one[:, None] - two[None], axis=2).min()


def test_a_unit_that_its_chain_joins_at_a_slightly_longer_reach_is_marginal():
    structure = read_structure(DATA / "1orc.pdb")
    hold, verdict, _ = hold_of(structure, [3, 4, 5, 13, 14, 15])
    assert verdict.verdict == "lattice-joined"
    by_chain = shortest(structure, [3, 4, 5], [13, 14, 15])
    assert 4.5 < by_chain < 5.0
    assert hold.is_marginal
    assert [word for _, word in hold.verdict_at] == [
        *("lattice-joined", "internal", "internal")
    ]


def test_a_unit_far_apart_in_its_chain_is_not_marginal(example):
    hold, verdict, _ = example
    assert not verdict.joining_distance_angstrom[1] < 5.5
    assert not hold.is_marginal
    assert {word for _, word in hold.verdict_at} == {"lattice-joined"}


def test_a_unit_inside_one_chain_buries_nothing_across_the_crystal():
    structure = read_structure(DATA / "4cup.cif.gz")
    hold, verdict, _ = hold_of(structure, list(range(1890, 1897)))
    assert verdict.verdict == "internal"
    assert hold.closes == "finite"
    assert hold.largest_without_lattice == 7
    assert not hold.is_marginal


def test_ca_atoms_alone_bury_no_area_that_could_be_told():
    structure = read_structure(DATA / "1lzh.pdb.gz")
    hold, _, _ = hold_of(structure, list(range(20, 30)), reach=7.5)
    assert np.isnan(hold.buried_area)
    assert [cutoff for cutoff, _ in hold.verdict_at] == [7.0, 8.0, 9.0]


def blurred(structure, residues, *, times):
    """Return the structure with the B factors of these residues raised."""
    b_iso = structure.b_iso.copy()
    b_iso[np.isin(structure.residue_of_atom, residues)] *= times
    return dataclasses.replace(structure, b_iso=b_iso)


def test_one_blurred_side_chain_that_alone_joins_a_unit_is_named(example):
    _, verdict, held = example
    structure, contacts = held.structure, held.contacts
    ends = np.stack([contacts.residue_1, contacts.residue_2])[:, verdict.contacts]
    one = int(ends[0, 0])
    lone = (ends == one).any(axis=0)
    keep = np.ones(len(contacts.kind), dtype=bool)
    keep[verdict.contacts[~lone]] = False
    kept = contacts_where(contacts, keep)
    members = np.arange(len(ACROSS))

    def deciding(some):
        return find_deciding_side_chains(members, some, sites=held.sites, contacts=kept)

    sharp = dataclasses.replace(
        structure,
        b_iso=np.full(len(structure.b_iso), 20.0),
        occupancy=np.ones(len(structure.b_iso)),
    )
    assert deciding(sharp) == ()
    assert deciding(blurred(sharp, [one], times=1.9)) == ()
    assert one in deciding(blurred(sharp, [one], times=2.1))


def test_poor_order_is_asked_of_side_chains_alone():
    structure = read_structure(DATA / "1orc.pdb")
    flat = dataclasses.replace(
        structure,
        b_iso=np.full(len(structure.b_iso), 10.0),
        occupancy=np.ones(len(structure.b_iso)),
    )
    poor = poorly_ordered_atoms(blurred(flat, [5], times=5))
    assert set(structure.residue_of_atom[poor]) == {5}
    assert not set(structure.atom_name[poor]) & {"N", "CA", "C", "O"}
    half = flat.occupancy.copy()
    half[structure.residue_of_atom == 7] = 0.4
    poor = poorly_ordered_atoms(dataclasses.replace(flat, occupancy=half))
    assert set(structure.residue_of_atom[poor]) == {7}
    assert (structure.kind_of_residue[structure.residue_of_atom[poor]] == POLYMER).all()


def test_an_analysis_numbers_its_crystal_contacts_once(monkeypatch, tmp_path):
    """Sentences, neighbours, page and tables all take the numerals of the record."""
    calls = []

    def counted(structure, contacts):
        calls.append(contacts)
        return number_crystal_contacts(structure, contacts)

    for name, module in list(sys.modules.items()):
        if name.startswith("structmap") and hasattr(module, "number_crystal_contacts"):
            monkeypatch.setattr(module, "number_crystal_contacts", counted)
    examples = Path(__file__).parent.parent / "examples"
    result = analyse(
        examples / "4cup.cif.gz",
        [examples / "invented_values.csv"],
        Settings(most_permutations=0),
    )
    result.save(tmp_path / "out")
    assert len(calls) == 1
    numbered = result.record.packing.numbered
    assert [c.numeral for c in numbered.crystal_contacts] == [
        neighbour.numeral for neighbour in result.record.packing.neighbours
    ]


# Units of the lattice, with the cutoffs from which contacts of the chain, with those of
# the assembly, with those of the lattice hold them together. From an enumeration of
# contacts with a program of its own.
UNIT_1A8O = [162, 165, 166, 169, 173, 182, 187, *range(204, 210), 211, 213]
UNIT_4CUP = [1867, 1870, *range(1883, 1886), 1916, *range(1918, 1923), 1924, 1952]
UNIT_4CUP += [1955, 1956, 1959, 1960, 1963]


@pytest.mark.parametrize(
    ("name", "numbers", "distances", "order", "closes"),
    [
        ("1a8o.pdb.gz", UNIT_1A8O, (4.69, 4.69, 3.38), 2, "rod"),
        ("4cup.cif.gz", UNIT_4CUP, (14.19, 14.19, 3.76), 1, "finite"),
    ],
)
def test_joining_distances_and_closure_of_units_across_the_lattice(
    name, numbers, distances, order, closes
):
    structure = read_structure(DATA / name)
    _, verdict, held = hold_of(structure, numbers)
    assert [round(d, 2) for d in verdict.joining_distance_angstrom] == [*distances]
    layout = lay_out_unit(
        np.arange(len(numbers)), structure, sites=held.sites, contacts=held.contacts
    )
    assert [level.is_covered for level in layout.levels] == [False, False, True]
    closure = layout.levels[-1].closure
    assert (closure.order, closure.closes) == (order, closes)
