"""Contacts of predicted models: those to residues of low confidence are weak."""

import csv
import dataclasses
from pathlib import Path

import gemmi
import numpy as np
import pytest

from structmap.analysis import analyse, list_contacts
from structmap.contacts import find_contacts, make_site_graph
from structmap.settings import Settings
from structmap.structure import read_structure
from structmap.words import care_sentences, unit_holds, unit_sentence

DATA = Path(__file__).parent / "data"
# Two stretches of 1ORC that touch, and are no neighbours in the chain.
FIRM, OTHER = range(35, 40), range(48, 53)


def model(folder, confidence):
    """Write 1ORC as a prediction: 95, and what is given for some residues by rank."""
    content = gemmi.read_structure(str(DATA / "1orc.pdb"))
    content.setup_entities()
    content.remove_ligands_and_waters()
    content.remove_alternative_conformations()
    content.cell = gemmi.UnitCell()
    content.spacegroup_hm = ""
    content.assemblies.clear()
    for rank, residue in enumerate(content[0][0]):
        for atom in residue:
            atom.b_iso = confidence.get(rank, 95.0)
    document = content.make_mmcif_document()
    document.sole_block().find_mmcif_category("_exptl.").erase()
    document.sole_block().init_loop("_ma_qa_metric.", ["id", "name"]).add_row(
        ["1", "pLDDT"]
    )
    path = folder / "model.cif"
    document.write_file(str(path))
    return path


def contacts_of(path):
    structure = read_structure(path)
    assert structure.is_predicted
    return structure, find_contacts(structure, reach_angstrom=4.5, assemblies=())


def analysed(folder, path, movers):
    structure = read_structure(path)
    rng = np.random.default_rng(3)
    values = folder / "values.csv"
    with values.open("w", newline="", encoding="utf-8") as handle:
        writer = csv.writer(handle)
        writer.writerow(("residue", "R2", "R2_error"))
        for rank, (number, letter) in enumerate(
            zip(structure.auth_seq_id, structure.ins_code, strict=True)
        ):
            value = rng.normal(18 if rank in movers else 10, 0.3)
            writer.writerow((f"{number}{letter}", f"{value:.3f}", 0.3))
    return analyse(path, [values], Settings(most_permutations=0))


def test_a_contact_is_as_sure_as_the_less_sure_of_its_residues(tmp_path):
    given = {20: 65.0, 31: 60.0, 32: 45.0}
    structure, contacts = contacts_of(model(tmp_path, given))
    each = np.array([given.get(i, 95.0) for i in range(len(structure.auth_seq_id))])
    lower = np.minimum(each[contacts.residue_1], each[contacts.residue_2])
    bonded = contacts.residue_2 == contacts.residue_1 + 1
    assert bonded.sum() == len(each) - 1
    assert np.isnan(contacts.confidence[bonded]).all()
    np.testing.assert_allclose(contacts.confidence[~bonded], lower[~bonded])
    assert (contacts.weak == (~bonded & (lower < 70))).all()
    assert (contacts.joins == (bonded | (lower >= 50))).all()
    assert contacts.weak.sum() > (~contacts.joins).sum() > 0


def test_measured_structures_have_no_weak_contacts():
    """Low B factors and low occupancies are no confidences."""
    for name in ("1orc.pdb", "1as5.cif.gz", "5a7u.pdb"):
        structure = read_structure(DATA / name)
        found = find_contacts(structure, reach_angstrom=4.5, assemblies=())
        assert not found.weak.any()
        assert found.joins.all()


def test_a_uncertain_neighbour_joins_weakly_and_an_unreadable_one_not_at_all(tmp_path):
    firm = analysed(tmp_path, model(tmp_path, {}), ()).record
    weak = analysed(tmp_path, model(tmp_path, {31: 60.0}), ()).record
    none = analysed(tmp_path, model(tmp_path, {31: 45.0}), ()).record
    edges = {
        name: {
            (a, b): w
            for a, b, w in zip(
                graph.site_1.tolist(),
                graph.site_2.tolist(),
                graph.weak.tolist(),
                strict=True,
            )
        }
        for name, graph in (
            ("firm", firm.graph),
            ("weak", weak.graph),
            ("none", none.graph),
        )
    }
    touching = {edge for edge in edges["firm"] if 31 in edge}
    along = {(30, 31), (31, 32)}
    assert len(touching) > 3
    assert touching > along
    assert set(edges["weak"]) == set(edges["firm"])
    assert {edge for edge, is_weak in edges["weak"].items() if is_weak} == (
        touching - along
    )
    assert set(edges["none"]) == set(edges["firm"]) - (touching - along)
    assert not any(edges["firm"].values())


def test_an_edge_is_weak_only_if_all_its_contacts_are(tmp_path):
    """The same sites on two residues each: of the second pair of copies all is sure."""
    record = analysed(tmp_path, model(tmp_path, {31: 60.0}), ()).record
    contacts, sites = record.contacts, record.sites
    twice = dataclasses.replace(
        contacts,
        **{
            column.name: np.concatenate([getattr(contacts, column.name)] * 2)
            for column in dataclasses.fields(contacts)
            if column.name not in ("reach_angstrom", "confidence")
        },
        confidence=np.concatenate(
            [contacts.confidence, np.full(len(contacts.kind), 99)]
        ),
    )
    assert make_site_graph(contacts, sites, cutoff_angstrom=4.5).weak.any()
    assert not make_site_graph(twice, sites, cutoff_angstrom=4.5).weak.any()


@pytest.mark.parametrize(
    ("confidence", "said"),
    [
        (95.0, None),
        (60.0, "five of its ten residues stay together"),
    ],
)
def test_a_unit_that_hangs_on_weak_contacts_is_said_to(tmp_path, confidence, said):
    path = model(tmp_path, dict.fromkeys(OTHER, confidence))
    result = analysed(tmp_path, path, {*FIRM, *OTHER})
    record = result.record
    (unit,) = record.units
    assert unit.members.tolist() == [*FIRM, *OTHER]
    text = unit_sentence(record, unit)
    lines = " / ".join(unit_holds(record, unit))
    if said is None:
        assert record.hold_of(unit).firm_pieces == ()
        assert "weak contacts" not in text + lines
        return
    assert record.hold_of(unit).firm_pieces == (tuple(FIRM), tuple(OTHER))
    assert (
        "it hangs together only by weak contacts, to residues predicted with low "
        f"confidence: without them {said}"
    ) in text
    assert said in lines
    result.save(tmp_path / "out")
    for name in ("motional_units.csv", "page.html"):
        assert "hangs together only by weak" in (tmp_path / "out" / name).read_text(
            "utf-8"
        )


def test_residues_that_cannot_be_read_off_the_model_join_no_unit(tmp_path):
    """The stretches touch in the file, but one of them is below 50 throughout."""
    path = model(tmp_path, dict.fromkeys(OTHER, 40.0))
    record = analysed(tmp_path, path, {*FIRM, *OTHER}).record
    found = sorted(unit.members.tolist() for unit in record.units)
    assert found == [[*FIRM], [*OTHER]]
    assert [t for t in care_sentences(record) if "predicted model:" in t] == [
        "The coordinates are a predicted model: five residues have a confidence below "
        "70, five of them in units; contacts to them are weak, but for the bonds of "
        "the chain. They are below 50, where a prediction is not to be interpreted: "
        "nothing but the chain joins such residues to a unit."
    ]


def test_the_list_of_contacts_says_how_many_are_weak(tmp_path):
    path = model(tmp_path, {31: 60.0})
    n_weak = int(contacts_of(path)[1].weak.sum())
    notes = list_contacts(path, Settings())[1]
    why = "a residue was predicted with a confidence below 70"
    assert f"{n_weak} contacts are weak: {why}" in notes
