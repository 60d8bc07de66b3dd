"""Odd files: each is named in a warning, and the answer that is left is given."""

import csv
from pathlib import Path

import gemmi
import numpy as np
import pytest

from structmap.analysis import analyse
from structmap.contacts import (
    CHAIN,
    LATTICE,
    choose_assemblies,
    find_contacts,
    overlap_warning,
)
from structmap.errors import UnknownSymmetryError
from structmap.holding import poorly_ordered_atoms
from structmap.settings import Settings
from structmap.structure import (
    POLYMER,
    is_low_confidence,
    read_structure,
    residue_confidence,
)
from structmap.words import care_sentences

DATA = Path(__file__).parent / "data"
ORC = (DATA / "1orc.pdb").read_text()


def made(tmp_path, lines, name="made.pdb"):
    path = tmp_path / name
    path.write_text("\n".join(lines) if isinstance(lines, list) else lines)
    return path


def contacts_of(structure):
    return find_contacts(
        structure,
        reach_angstrom=4.5,
        assemblies=choose_assemblies(structure, "auto"),
    )


# --- odd crystals and models ----------------------------------------------------------


def test_a_cell_that_overlaps_itself_is_named_and_answered(tmp_path):
    """Two thirds of the right a: images must run into each other."""
    lines = [line for line in ORC.splitlines() if not line.startswith("SCALE")]
    whole = read_structure(DATA / "1orc.pdb")
    assert overlap_warning(whole, contacts_of(whole)) == ""
    cryst1 = next(line for line in lines if line.startswith("CRYST1"))
    short = f"{float(cryst1[6:15]) * 0.66:9.3f}"
    lines[lines.index(cryst1)] = cryst1[:6] + short + cryst1[15:]
    structure = read_structure(made(tmp_path, lines))
    found = contacts_of(structure)
    said = overlap_warning(structure, found)
    assert said.startswith("Molecules overlap with their images: ")
    elsewhere = (found.operator != 0) | found.shift.any(axis=1)
    n_over = int((elsewhere & (found.distance_angstrom < 1)).sum())
    assert f" {n_over} pairs of residues come within" in said
    assert (found.kind == LATTICE).sum() > 0


def unnamed_group(tmp_path, drop):
    """1ORC without the name of its group and without some of its listed operators."""
    lines = [
        line[:55] + " " * 11 + line[66:] if line.startswith("CRYST1") else line
        for line in ORC.splitlines()
        if not any(line.startswith(f"REMARK 290{n:>8}555") for n in drop)
    ]
    return made(tmp_path, lines)


def test_listed_operators_that_are_no_group_are_completed_and_named(tmp_path):
    """Two of the screw axes of P 21 21 21 generate the third."""
    complete = read_structure(unnamed_group(tmp_path, []))
    assert complete.warnings == ()
    structure = read_structure(unnamed_group(tmp_path, [4]))
    assert set(structure.crystal.triplets) == set(complete.crystal.triplets)
    assert any(
        text.startswith("The 3 operators listed in the file are no group; the 4 that")
        for text in structure.warnings
    )
    assert len(contacts_of(structure).kind) == len(contacts_of(complete).kind)


def listed_instead(tmp_path, triplets):
    """1ORC with these operators beside the identity, and no name of a group."""
    text = unnamed_group(tmp_path, [2, 3, 4]).read_text().splitlines()
    first = next(
        i
        for i, line in enumerate(text)
        if line.startswith("REMARK 290") and "555" in line
    )
    text[first + 1 : first + 1] = [
        f"REMARK 290{n:>8}555   {triplet}" for n, triplet in enumerate(triplets, 2)
    ]
    return made(tmp_path, text)


@pytest.mark.parametrize(
    "triplets",
    [
        ["x+1/24,y,z", "x,y+1/24,z"],  # 576 translations
        ["y,x+y,z"],  # of no finite order
    ],
)
def test_operators_that_no_group_holds_leave_the_crystal_out(tmp_path, triplets):
    path = listed_instead(tmp_path, triplets)
    structure = read_structure(path)
    assert structure.crystal is None
    assert structure.warnings == (
        f"The {len(triplets) + 1} operators listed in the file are no group: together "
        "they generate more than 192. The crystal is left out: contacts are those of "
        "the molecule and its assemblies alone, and what the crystal does cannot be "
        "told.",
    )
    answered_without_crystal(tmp_path, path, "the operators that the file lists are no")


def answered_without_crystal(tmp_path, path, reason):
    """The molecule is answered for as if there were no crystal, and it is said."""
    whole = contacts_of(read_structure(DATA / "1orc.pdb"))
    chain = whole.kind == CHAIN
    result = analysed(tmp_path, path)
    found = result.record.contacts
    np.testing.assert_array_equal(found.residue_1, whole.residue_1[chain])
    np.testing.assert_array_equal(found.residue_2, whole.residue_2[chain])
    said = " ".join(care_sentences(result.record))
    assert result.record.structure.warnings[0] in said
    assert f"no crystal to ask about, because {reason}" in said


def test_triplets_that_cannot_be_read_are_no_operators(tmp_path):
    with pytest.raises(UnknownSymmetryError, match="no operators are listed"):
        read_structure(listed_instead(tmp_path, ["x,y,q"]))


@pytest.mark.parametrize("lengths", [(5.0, 5.0, 5.0), (0.5, 400.0, 400.0)])
def test_a_cell_too_small_for_the_molecule_is_named_and_left_out(tmp_path, lengths):
    """1 Å³ for each of the 2,236 atoms, and a translation of half an Å."""
    lines = [line for line in ORC.splitlines() if not line.startswith("SCALE")]
    place = next(i for i, line in enumerate(lines) if line.startswith("CRYST1"))
    cell = "".join(f"{length:9.3f}" for length in lengths)
    lines[place] = lines[place][:6] + cell + lines[place][33:]
    path = made(tmp_path, lines)
    structure = read_structure(path)
    assert structure.crystal is None
    stated = " ".join(f"{length:g}" for length in lengths)
    assert structure.warnings == (
        f"The unit cell {stated} 90 90 90 with 4 operators is too small for the "
        "molecule, which would overlap with its own images. The crystal is left out: "
        "contacts are those of the molecule and its assemblies alone, and what the "
        "crystal does cannot be told.",
    )
    answered_without_crystal(tmp_path, path, "the unit cell is too small for the")


@pytest.mark.parametrize("factor", [0.66, 0.5])
def test_an_overlapping_crystal_gives_a_whole_analysis(tmp_path, factor):
    """Half the cell has room for the atoms, but not for the molecules."""
    lines = [line for line in ORC.splitlines() if not line.startswith("SCALE")]
    place = next(i for i, line in enumerate(lines) if line.startswith("CRYST1"))
    short = "".join(
        f"{factor * float(lines[place][k : k + 9]):9.3f}" for k in (6, 15, 24)
    )
    lines[place] = lines[place][:6] + short + lines[place][33:]
    result = analysed(tmp_path, made(tmp_path, lines))
    assert any(
        text.startswith("Molecules overlap with their images: ")
        for text in care_sentences(result.record)
    )
    whole = contacts_of(read_structure(DATA / "1orc.pdb"))
    found = result.record.contacts
    assert (found.kind == CHAIN).sum() == (whole.kind == CHAIN).sum()
    result.save(tmp_path / "out")
    assert (tmp_path / "out" / "page.html").exists()


@pytest.mark.parametrize(
    ("chains", "rest"),
    [("A, Q", ""), ("Q", ", and nothing is left of assembly 1")],
)
def test_an_assembly_of_chains_that_are_missing_is_named_and_used(
    tmp_path, chains, rest
):
    lines = [
        line.replace("CHAINS: A", f"CHAINS: {chains}")
        if line.startswith("REMARK 350")
        else line
        for line in ORC.splitlines()
    ]
    structure = read_structure(made(tmp_path, lines))
    said = [text for text in structure.warnings if "does not hold" in text]
    assert said == [
        "Assemblies name chains that the file does not hold (1: Q); the others of "
        f"each make up the assembly{rest}."
    ]
    whole = contacts_of(read_structure(DATA / "1orc.pdb"))
    assert contacts_of(structure).kind.tolist() == whole.kind.tolist()


@pytest.mark.parametrize(("alternates", "occupancy"), [(True, 0.8), (False, 1.5)])
def test_occupancies_that_sum_to_more_than_one_are_named(
    tmp_path, alternates, occupancy
):
    """1EJG: alternate conformations with occupancies that sum to one."""
    content = gemmi.read_structure(str(DATA / "1ejg.pdb.gz"))
    assert not any(
        "ccupancies" in text for text in read_structure(DATA / "1ejg.pdb.gz").warnings
    )
    residue = next(
        r for r in content[0][0] if any(a.altloc != "\0" for a in r) == alternates
    )
    for atom in residue:
        atom.occ = occupancy
    path = tmp_path / "crowded.pdb"
    content.write_pdb(str(path))
    said = [t for t in read_structure(path).warnings if "sum to more than 1" in t]
    assert len(said) == 1
    assert f"residue A/{residue.name}\u00a0{residue.seqid.num}" in said[0]


def test_a_model_without_side_chains_is_named_and_answered(tmp_path):
    lines = [
        line
        for line in ORC.splitlines()
        if not line.startswith("ATOM")
        or line[12:16].strip() in ("N", "CA", "C", "O", "CB")
    ]
    structure = read_structure(made(tmp_path, lines))
    assert not structure.ca_only
    assert any("has no side chains beyond CB" in text for text in structure.warnings)
    assert len(contacts_of(structure).kind) > 60


def test_the_warnings_of_the_file_are_read_with_care(tmp_path):
    lines = [
        line.replace("CHAINS: A", "CHAINS: A, Q")
        if line.startswith("REMARK 350")
        else line
        for line in ORC.splitlines()
    ]
    record = analysed(tmp_path, made(tmp_path, lines)).record
    assert any("does not hold (1: Q)" in text for text in care_sentences(record))


# --- predicted models -----------------------------------------------------------------


def analysed(tmp_path, path):
    structure = read_structure(path)
    rng = np.random.default_rng(2)
    rows = [
        (
            structure.auth_asym_id[r],
            f"{structure.auth_seq_id[r]}{structure.ins_code[r]}",
            f"{rng.normal(10, 0.3):.3f}",
            0.3,
        )
        for r in np.flatnonzero(structure.kind_of_residue == POLYMER)
    ]
    values = tmp_path / "values.csv"
    with values.open("w", newline="", encoding="utf-8") as handle:
        csv.writer(handle).writerows([("chain", "residue", "R2", "R2_error"), *rows])
    return analyse(path, [values], Settings(most_permutations=0))


def predicted(tmp_path, *, metric=False, method=""):
    """Write 1ORC as a predicted model: one number a residue, 40 for the first five."""
    content = gemmi.read_structure(str(DATA / "1orc.pdb"))
    content.setup_entities()
    content.remove_ligands_and_waters()
    content.cell = gemmi.UnitCell()
    content.spacegroup_hm = ""
    content.assemblies.clear()
    for index, residue in enumerate(content[0][0]):
        for atom in residue:
            atom.b_iso = 40.0 if index < 5 else 90.0 + (index % 7)
    document = content.make_mmcif_document()
    block = document.sole_block()
    block.find_mmcif_category("_exptl.").erase()
    if method:
        block.set_pair("_exptl.method", gemmi.cif.quote(method))
    if metric:
        loop = block.init_loop("_ma_qa_metric.", ["id", "mode", "name", "type"])
        loop.add_row(["1", "local", "pLDDT", "pLDDT"])
    path = tmp_path / "model.cif"
    document.write_file(str(path))
    return path


@pytest.mark.parametrize("metric", [True, False])
def test_a_predicted_model_is_told_by_its_metric_or_by_one_number_a_residue(
    tmp_path, metric
):
    structure = read_structure(predicted(tmp_path, metric=metric))
    assert structure.is_predicted
    assert structure.no_crystal_reason == "the coordinates are a predicted model"
    assert np.flatnonzero(is_low_confidence(structure)).tolist() == [0, 1, 2, 3, 4]
    assert residue_confidence(structure)[:6].tolist() == pytest.approx(
        [40.0] * 5 + [95]
    )


def test_measured_structures_are_no_predictions():
    for path in sorted(DATA.glob("1*.*")):
        structure = read_structure(path)
        assert not structure.is_predicted, path.name
        assert not is_low_confidence(structure).any()
        assert np.isnan(residue_confidence(structure)).all()


def test_a_model_from_an_experiment_is_no_prediction(tmp_path):
    path = predicted(tmp_path, method="SOLUTION NMR")
    assert not read_structure(path).is_predicted


def test_low_confidence_is_marked_in_table_and_words(tmp_path):
    result = analysed(tmp_path, predicted(tmp_path, metric=True))
    said = [t for t in care_sentences(result.record) if "predicted model:" in t]
    assert said == [
        "The coordinates are a predicted model: five residues have a confidence below "
        "70; contacts to them are weak, but for the bonds of the chain. They are below "
        "50, where a prediction is not to be interpreted: nothing but the chain joins "
        "such residues to a unit."
    ]
    result.save(tmp_path / "out")
    with (tmp_path / "out" / "sites.csv").open(encoding="utf-8") as handle:
        rows = list(csv.DictReader(handle))
    marked = [r for r in rows if "predicted with low confidence (40)" in r["note"]]
    assert len(marked) == 5
    assert "predicted with low confidence" in (tmp_path / "out/page.html").read_text(
        "utf-8"
    )


def test_uncertain_side_chains_take_the_place_of_poor_order(tmp_path):
    structure = read_structure(predicted(tmp_path))
    poor = poorly_ordered_atoms(structure)
    assert set(structure.residue_of_atom[poor]) == {0, 1, 2, 3, 4}
