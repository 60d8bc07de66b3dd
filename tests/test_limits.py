"""What is said of residues that were not measured."""

import tomllib
from pathlib import Path

import gemmi
import numpy as np
import pytest

import structmap
from structmap.settings import make_settings
from structmap.tables import sites_table
from structmap.words import care_sentences, find_gaps, rests_on

EXAMPLES = Path(__file__).parent.parent / "examples"
FIRST_NUMBER = 1856


def analyse_without(folder, left_out=()):
    """Analyse the example without the rows of some residues, numbered as the entry."""
    rows = (EXAMPLES / "invented_values.csv").read_text().splitlines()
    kept = [
        row
        for row in rows[1:]
        if int(row.split(",")[0]) + FIRST_NUMBER - 1 not in left_out
    ]
    path = folder / "values.csv"
    path.write_text("\n".join([rows[0], *kept]) + "\n")
    settings = tomllib.loads((EXAMPLES / "settings.toml").read_text())
    return structmap.analyse(
        EXAMPLES / "4cup.cif.gz",
        path,
        make_settings({**settings, "most_permutations": 0}),
    ).record


@pytest.fixture(scope="module")
def example(tmp_path_factory):
    return analyse_without(tmp_path_factory.mktemp("all"))


def limits(record):
    return " ".join(p for p in rests_on(record) if p.startswith("What cannot be told"))


def contacts_by_hand(number, cutoff=4.5):
    """Numbers of the residues near one, in all images, by gemmi's neighbour search."""
    structure = gemmi.read_structure(str(EXAMPLES / "4cup.cif.gz"))
    structure.setup_entities()
    structure.remove_ligands_and_waters()
    structure.remove_hydrogens()
    search = gemmi.NeighborSearch(structure[0], structure.cell, cutoff + 1).populate()
    near = set()
    for residue in structure[0]["A"]:
        if residue.seqid.num != number:
            continue
        for atom in residue:
            for mark in search.find_atoms(atom.pos, "\0", radius=cutoff):
                other = mark.to_cra(structure[0])
                image = search.dist(atom.pos, mark.pos)
                if image <= cutoff and other.residue.seqid.num != number:
                    near.add(other.residue.seqid.num)
    return near


def test_gaps_are_the_unmeasured_residues_that_a_site_touches(example):
    structure, sites = example.structure, example.sites
    gaps = find_gaps(example)
    measured = {int(structure.auth_seq_id[r]) for r in sites.residue}
    # 4CUP has a few alternate conformations; these residues and neighbours have none.
    for number in (1893, 1901, 1922, 1956):
        site = int(np.flatnonzero(sites.name == f"A/{number}")[0])
        found = {int(structure.auth_seq_id[r]) for r in gaps.get(site, ())}
        assert found == contacts_by_hand(number) - measured, number


def test_a_unit_beside_unmeasured_residues_is_told_with_their_names(example):
    assert "U1 touches four residues that were not measured" in limits(example)
    assert "U1 and U3 both touch P1924, not measured" in limits(example)


def test_a_unit_whose_surroundings_are_mostly_unmeasured_is_called_uncertain(
    example, tmp_path
):
    assert "uncertain" not in limits(example)
    loop = {1890, 1891, 1893, 1894, 1895, 1896, 1897, 1898, 1900, 1901}
    structure, graph = example.structure, example.graph
    number = structure.auth_seq_id[example.sites.residue]
    pairs = list(zip(number[graph.site_1], number[graph.site_2], strict=True))
    around = {int(b) for pair in pairs for a, b in (pair, pair[::-1]) if a in loop}
    few = analyse_without(tmp_path, left_out=sorted(around - loop)[::2])
    assert "so its size and its border are uncertain" in limits(few)


def test_notes_of_sites_in_units_name_what_they_touch(example):
    table = sites_table(example)
    note = table.columns.index("note")
    unit = table.columns.index("motional_unit")
    notes = {row[0]: row[note] for row in table.rows}
    units = {row[0]: row[unit] for row in table.rows}
    assert "\u00a0" not in "".join(notes.values())
    assert notes["A/1901"] == "46 in the table; touches P1899 K1903 P1908, not measured"
    touching = [site for site, text in notes.items() if "touches" in text]
    assert touching
    assert all(units[site] for site in touching)


def test_few_measured_residues_are_told(tmp_path):
    every_third = [n for n in range(1856, 1975) if n % 3]
    few = analyse_without(tmp_path, left_out=every_third)
    told = " ".join(care_sentences(few))
    assert f"Only {len(few.measurements.site)} of 115 residues were measured" in told


def test_a_residue_without_a_measured_neighbour_is_told(tmp_path, example):
    structure, contacts = example.structure, example.contacts
    number = structure.auth_seq_id
    near = {
        int(number[two if int(number[one]) == 1940 else one])
        for one, two in zip(contacts.residue_1, contacts.residue_2, strict=True)
        if 1940 in (int(number[one]), int(number[two]))
    }
    alone = analyse_without(tmp_path, left_out=near - {1940})
    assert "One measured residue touches no other measured residue; whether it" in (
        " ".join(care_sentences(alone))
    )
    assert "touches no other" not in " ".join(care_sentences(example))
