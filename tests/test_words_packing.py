"""What is said of what holds a unit, of assemblies, of the crystal of the sample."""

import csv
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from structmap.analysis import analyse, list_contacts
from structmap.analysis.compute import analyse_table
from structmap.errors import SettingError
from structmap.quotient import directions
from structmap.settings import Settings
from structmap.structure import POLYMER, read_structure
from structmap.words import care_sentences, facts, rests_on, unit_holds
from structmap.words.holding import link_phrase

DATA = Path(__file__).parent / "data"
ACROSS = {1916, 1919, 1920, 1922, 1955, 1956, 1959, 1960}
QUICK = {"most_permutations": 0, "repeats": 20}


def analysed(folder, name, hot=frozenset(), **settings):
    """Analyse made-up values in which the named residues stand out."""
    structure = read_structure(DATA / name)
    rng = np.random.default_rng(3)
    rows = {}
    for r in np.flatnonzero(structure.kind_of_residue == POLYMER).tolist():
        number = int(structure.auth_seq_id[r])
        key = str(structure.auth_asym_id[r]), f"{number}{structure.ins_code[r]}"
        rows.setdefault(key, f"{rng.normal(10 + 15 * (number in hot), 0.3):.3f}")
    path = folder / "values.csv"
    with path.open("w", newline="", encoding="utf-8") as handle:
        writer = csv.writer(handle)
        writer.writerow(("chain", "residue", "R2", "R2_error"))
        writer.writerows((*key, value, 0.3) for key, value in rows.items())
    return analyse(DATA / name, [path], Settings(**QUICK, **settings))


@pytest.fixture(scope="module")
def across(tmp_path_factory):
    folder = tmp_path_factory.mktemp("across")
    return analysed(folder, "4cup.cif.gz", ACROSS, network=True)


def test_the_weakest_link_is_told_with_the_molecule_that_it_leads_to(across):
    record = across.record
    lines = unit_holds(record, record.units[0])
    assert record.units[0].lattice.verdict == "lattice-joined"
    assert any(line.startswith("weakest link: ") for line in lines)
    assert any(line.endswith("buried across the crystal") for line in lines)
    told = " ".join(rests_on(record))
    assert "to the molecule at −x+1/2, −y+1/2, z+1/2" in told
    assert "the verdict is lattice-joined at 4, 5 and 6\u00a0Å as well" in told


def test_the_assembly_is_named_with_who_determined_it(across):
    """4CUP: REMARK 350 and mmCIF give one dimer, by authors and software."""
    told = " ".join(rests_on(across.record))
    assert (
        "assembly 1 (dimeric, larger than the asymmetric unit), determined by the "
        "authors, are complex" in told
    )
    assert "assembly 1, by the authors" in dict(facts(across.record))["Coordinates"]


def test_the_elastic_network_is_labelled_a_model_and_sets_no_verdict(across):
    """Check values: correlation with B 0.42, 0.81, 0.86, computed by dense algebra."""
    told = next(text for text in rests_on(across.record) if "elastic" in text)
    assert told.startswith("Evidence of a model, which sets no verdict")
    assert "0.42 alone, 0.81 in the assembly and 0.86 in the crystal" in told
    plain = analysed_again(across)
    verdicts = [unit.lattice.verdict for unit in plain.units]
    assert verdicts == [unit.lattice.verdict for unit in across.record.units]


def analysed_again(result):
    """Return the record of the same values without the network."""
    settings = replace(result.record.settings, network=False)
    return analyse_table(DATA / "4cup.cif.gz", result.record.table, settings)


def test_the_numbers_stand_in_the_run_record(across, tmp_path):
    across.save(tmp_path / "out")
    found = json.loads((tmp_path / "out" / "run.json").read_text("utf-8"))["packing"]
    hold = found["holds"][0]
    assert hold["verdict_at_cutoff_angstrom"] == dict.fromkeys(
        ("4", "5", "6"), "lattice-joined"
    )
    kept = hold["residues_that_stay_together"]
    assert kept["without_lattice"] < kept["all_contacts"]
    assert sum(hold["weakest_link"]["kinds"].values()) > 0
    # Areas of the three neighbours as two general programs agree on (rounded).
    areas = [c["buried_area_square_angstrom"] for c in found["crystal_contacts"]]
    assert sorted(areas) == pytest.approx([596, 695, 945], abs=6)
    assert found["elastic_network"]["evidence"].startswith("of a model")
    assert len(found["elastic_network"]["damping_by_packing"]) == 115


@pytest.mark.parametrize(
    ("name", "word", "way"),
    [("5wkd.pdb", "rod", "b"), ("5e5z.pdb", "layer", "a and b")],
)
def test_slices_of_endless_arrays_are_named(tmp_path, name, word, way):
    """Amyloid-like peptides: the assembly repeats along these axes of the cell."""
    record = analysed(tmp_path, name).record
    said = [text for text in care_sentences(record) if "finite slice" in text]
    assert said == [
        f"The assembly is a finite slice of an endless {word}: its contacts go on "
        f"through the crystal along {way}."
    ]


def test_a_crystal_without_assembly_is_said(tmp_path):
    record = analysed(tmp_path, "4hhh_frag.pdb").record
    if record.structure.assemblies:
        pytest.fail("the file was chosen for it names no assembly")
    assert any("names no assembly" in text for text in care_sentences(record))


def test_another_crystal_of_the_sample_is_said_first(tmp_path):
    record = analysed(tmp_path, "1orc.pdb", sample_cell="50 60 70 90 90 90").record
    first = care_sentences(record)[0]
    assert first.startswith("The sample is a different crystal: lattice contacts")


def test_the_same_crystal_of_the_sample_is_a_fact(tmp_path):
    structure = read_structure(DATA / "1orc.pdb")
    cell = " ".join(f"{x * 1.005:g}" for x in structure.crystal.cell[:3])
    result = analysed(tmp_path, "1orc.pdb", sample_cell=f"{cell} 90 90 90")
    assert (
        "crystal of the sample: same lattice"
        in dict(facts(result.record))["Coordinates"]
    )
    said = " ".join(care_sentences(result.record))
    assert "different crystal" not in said
    assert "cannot be told from these data" not in said


def test_a_cell_given_for_a_file_without_crystal_is_refused(tmp_path):
    with pytest.raises(SettingError, match=r"1as5\.cif\.gz holds no crystal"):
        analysed(tmp_path, "1as5.cif.gz", sample_cell="50 60 70 90 90 90")


@pytest.mark.parametrize(
    ("images", "words"),
    [
        (("-x,y+1/2,-z [0 1 0]",), "the molecule at −x, y+1/2, −z"),
        (("x,y,z [1 0 -1]",), "the molecule at x+1, y, z−1"),
        (
            ("x,y,z [0 0 0]", "-x,-y,z [0 0 0]"),
            "a molecule of the asymmetric unit in no common assembly and the molecule "
            "at −x, −y, z",
        ),
    ],
)
def test_neighbours_in_words(across, images, words):
    hold = replace(across.record.packing.holds[0], link_images=images)
    assert link_phrase(hold).partition(" to ")[2] == words


def test_directions_of_periods():
    assert directions([[0, 1, 0]]) == "along b"
    assert directions([[-1, 0, 0], [1, 0, 2]]) == "along a and [1 0 2]"
    assert directions([]) == ""


@pytest.mark.parametrize(
    ("name", "said"),
    [
        ("3jqh.cif", "a finite slice of an endless rod: its contacts go on"),
        ("5e5z.pdb", "a finite slice of an endless layer: its contacts go on"),
        ("4cup.cif.gz", ""),
    ],
)
def test_the_list_of_contacts_names_a_slice_of_something_endless(name, said):
    notes = list_contacts(DATA / name, Settings())[1]
    assert [said in note for note in notes if "endless" in note] == [True] * bool(said)
