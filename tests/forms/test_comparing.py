"""Several forms of one protein."""

import gzip
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from structmap.errors import FileProblemError
from structmap.forms import (
    DifferentProteinError,
    FormUnit,
    UnitInForm,
    compare_folders,
    compare_forms,
    find_changes,
    make_form,
    map_form,
    reference_of,
    sites_in_form,
    verdict_over_forms,
)
from structmap.structure import read_structure
from structmap.tables import table_text
from tests.quotient.cases import archive, sites_of
from tests.quotient.test_unit import UNIT_4CUP


def apart_from_its_crystal(structure):
    """The same molecule in solution: no crystal, other chain name, other numbers."""
    turn = Rotation.from_rotvec([0.3, -1.0, 0.6]).as_matrix()
    return replace(
        structure,
        crystal=None,
        assemblies=(),
        no_crystal_reason="it is in solution",
        position=structure.position @ turn.T + [10.0, -20.0, 5.0],
        auth_asym_id=np.full(len(structure.auth_asym_id), "X"),
        auth_seq_id=structure.auth_seq_id - 1800,
        name="solution.cif",
        chain_copies=tuple(
            replace(copy, auth_asym_id="X") for copy in structure.chain_copies
        ),
    )


INSIDE = list(range(1890, 1902))


@pytest.fixture(scope="module")
def compared(data_folder):
    structure = archive(data_folder, "4cup.cif.gz")
    sites = sites_of(structure, [*UNIT_4CUP, *INSIDE])
    forms = [make_form(structure, {}), make_form(apart_from_its_crystal(structure), {})]
    n_first = len(UNIT_4CUP)
    units = (
        FormUnit(name="U1", members=np.arange(n_first)),
        FormUnit(name="U2", members=np.arange(n_first, n_first + len(INSIDE))),
    )
    return compare_forms(forms, sites, units=units)


def test_unit_joined_by_the_crystal_alone_is_an_artefact_of_it(compared):
    """4CUP: these residues touch only through lattice contacts."""
    first, second = compared.units_in_forms[0]
    assert (first.level, first.connected) == ("lattice", True)
    assert "lattice" in first.kinds
    assert first.lattice_operators
    assert (second.level, second.connected) == ("apart", False)
    assert compared.verdicts[0] == "artefact of this crystal"


def test_unit_inside_the_chain_is_a_property_of_the_molecule(compared):
    assert [found.level for found in compared.units_in_forms[1]] == ["chain", "chain"]
    assert compared.verdicts[1] == "property of the molecule"
    assert not compared.units_in_forms[1][0].lattice_operators


def test_tables_have_the_columns_of_the_files(compared):
    assert compared.forms_table.columns[:7] == (
        *("motional_unit", "coordinates", "space_group", "connected", "kinds"),
        *("lattice_operators", "verdict_over_forms"),
    )
    assert len(compared.forms_table.rows) == 4
    text = table_text(compared.forms_table)
    assert "U1,solution.cif,,no," in text
    assert "C 2 2 21,yes," in text


def test_a_form_turned_and_moved_is_laid_back_on_the_first(compared):
    pair = compared.pairs[0]
    assert pair.rms_angstrom < 1e-6
    assert pair.n_modelled == 115
    assert len(pair.bodies) == 1
    turn = Rotation.from_rotvec([0.3, -1.0, 0.6]).as_matrix()
    np.testing.assert_allclose(pair.transform[:3, :3], turn.T, atol=1e-7)


def test_the_same_molecule_keeps_its_chain_contacts_and_loses_the_others(compared):
    pair = compared.pairs[0]
    of_kind = {
        kind: {change.change for change in pair.changes if change.kind == kind}
        for kind in ("chain", "complex", "lattice")
    }
    assert of_kind == {"chain": {"kept"}, "complex": {"opened"}, "lattice": {"opened"}}


def test_two_cutoffs_forgive_small_shifts(data_folder):
    """0.2 Å of noise moves contacts across one cutoff but not across two."""
    structure = archive(data_folder, "1gbt.cif.gz")
    alone = replace(structure, crystal=None, assemblies=())
    rng = np.random.default_rng(2)
    shaken = alone.position + rng.normal(scale=0.2, size=alone.position.shape)
    forms = make_form(alone, {}), make_form(replace(alone, position=shaken), {})
    sites = sites_of(structure, [50, 51])
    own = map_form(alone, reference_of(structure, sites))
    changes = find_changes(*forms, first_map=own, second_map=own)
    lost = sum(change.change != "kept" for change in changes)
    kept = len(changes) - lost
    near = [
        {
            pair
            for pair, distance in zip(
                zip(form.contacts.residue_1, form.contacts.residue_2, strict=True),
                form.contacts.distance_angstrom,
                strict=True,
            )
            if distance <= 4.5 and pair[1] - pair[0] > 3
        }
        for form in forms
    ]
    one_cutoff = len(near[0] ^ near[1])
    assert kept > 400
    assert lost <= 4 < one_cutoff


def test_sequences_decide_and_not_numbers(data_folder):
    """Ubiquitin in a crystal and as an NMR ensemble of CA atoms."""
    crystal = archive(data_folder, "pdb1ubi.pdb")
    ensemble = archive(data_folder, "2k39_ca.pdb.gz")
    shifted = replace(ensemble, auth_seq_id=ensemble.auth_seq_id + 500)
    sites = sites_of(crystal, list(range(1, 77)))
    reference = reference_of(crystal, sites)
    own, other = map_form(crystal, reference), map_form(shifted, reference)
    there = sites_in_form(sites, own, other)
    np.testing.assert_array_equal(shifted.auth_seq_id[there.residue], range(501, 577))
    assert other.n_mutations == 0


def test_ubiquitin_has_one_core_without_its_tail(data_folder):
    """The last residues of ubiquitin are disordered (common knowledge, no source)."""
    crystal = archive(data_folder, "pdb1ubi.pdb")
    ensemble = archive(data_folder, "2k39_ca.pdb.gz")
    sites = sites_of(crystal, list(range(1, 77)))
    forms = [make_form(crystal, {}), make_form(ensemble, {})]
    pair = compare_forms(forms, sites, units=()).pairs[0]
    core = set(pair.bodies[0].members.tolist())
    assert len(core) > 60
    assert 75 not in core
    assert pair.bodies[0].rms_angstrom < 1.0


def test_a_chain_shared_by_two_complexes_is_found_in_both(data_folder):
    """Beta-2 microglobulin is chain B of 1BD2 and of 3PWP, two different crystals."""
    first = archive(data_folder, "1bd2.cif.gz")
    second = archive(data_folder, "3pwp.cif.gz")
    sites = sites_of(first, list(range(20, 40)), "B")
    reference = reference_of(first, sites)
    own, other = map_form(first, reference), map_form(second, reference)
    there = sites_in_form(sites, own, other)
    assert set(second.auth_asym_id[there.copy_residue]) == {"B"}
    names = first.auth_comp_id[sites.residue]
    np.testing.assert_array_equal(second.auth_comp_id[there.residue], names)


def test_another_protein_is_refused(data_folder):
    first = archive(data_folder, "1orc.pdb")
    second = archive(data_folder, "pdb1ubi.pdb")
    reference = reference_of(first, sites_of(first, [10, 11]))
    with pytest.raises(DifferentProteinError, match=r"pdb1ubi.pdb: no chain has"):
        map_form(second, reference)


def in_form(level, verdict=""):
    return UnitInForm(
        n_members=5,
        n_modelled=5,
        connected=level != "apart",
        level=level,
        kinds=(),
        lattice_verdict=verdict,
        lattice_operators=(),
        level_without_assemblies=level,
    )


@pytest.mark.parametrize(
    ("levels", "expected"),
    [
        (["chain", "chain", "chain"], "property of the molecule"),
        (["chain", "complex"], "property of the molecule and its assembly"),
        (["chain", "apart"], "depends on the form"),
        (["complex", "lattice"], "depends on the form"),
        (["lattice", "apart", "apart"], "artefact of this crystal"),
        (["lattice", "lattice"], "joined by the lattice in every form"),
        (["lattice", "chain"], "joined by the lattice here, within the molecule"),
        (["lattice", "lattice", "apart"], "differs between the other forms"),
        (["apart", "chain"], "apart in the form measured"),
        (["lattice", "not modelled"], "cannot be told"),
        (["lattice"], "cannot be told"),
    ],
)
def test_what_the_forms_say_together(levels, expected):
    assert expected in verdict_over_forms([in_form(level) for level in levels])


def test_a_stray_member_does_not_turn_an_internal_unit_into_a_lattice_one():
    found = verdict_over_forms([in_form("lattice", "internal"), in_form("chain")])
    assert found == "property of the molecule"


# --- folders --------------------------------------------------------------------------


def written(folder: Path, coordinates: str, numbers: list[int], chain: str) -> Path:
    """A folder as an analysis leaves it, with one unit of all sites."""
    folder.mkdir()
    names = [f"{chain}/{number}" for number in numbers]
    sites = "site,atom,copies\n" + "".join(f"{name},,{name}\n" for name in names)
    (folder / "sites.csv").write_text(sites, encoding="utf-8")
    units = f"motional_unit,sites\nU1,{' '.join(names)}\n"
    (folder / "motional_units.csv").write_text(units, encoding="utf-8")
    run = {
        "settings": {"assembly": "auto"},
        "inputs_sha256": {f"{folder.name}.cif": ""},
    }
    (folder / "run.json").write_text(json.dumps(run), encoding="utf-8")
    (folder / "mapped.cif").write_text(coordinates, encoding="utf-8")
    return folder


@pytest.fixture
def two_folders(tmp_path, repository):
    source = repository / "examples" / "4cup.cif.gz"
    text = gzip.decompress(source.read_bytes()).decode()
    other = text.replace("'X-RAY DIFFRACTION'", "'SOLUTION NMR'")
    assert read_structure(source).crystal is not None
    return [
        written(tmp_path / "first", text, UNIT_4CUP, "A"),
        written(tmp_path / "second", other, UNIT_4CUP, "A"),
    ]


def test_folders_are_compared(two_folders):
    found = compare_folders(two_folders)
    assert [form.name for form in found.forms] == ["first.cif", "second.cif"]
    assert found.verdicts == ("artefact of this crystal",)
    units = {row[9] for row in found.contacts_table.rows}
    assert units == {"U1", None}


def test_the_same_form_twice_changes_nothing(two_folders):
    found = compare_folders([two_folders[0], two_folders[0]])
    assert {row[5] for row in found.contacts_table.rows} == {"kept"}
    assert found.verdicts == ("joined by the lattice in every form",)
    names = [row[1] for row in found.forms_table.rows]
    assert names == ["first.cif", "first.cif (2)"]


@pytest.mark.parametrize(
    ("file", "content", "message"),
    [
        ("run.json", None, "run.json: is not there"),
        ("run.json", "{", "no run record"),
        ("sites.csv", "a,b\n1,2\n", "has no column site"),
        ("sites.csv", "site,copies\nA/9,A/9\n", "mapped.cif lacks"),
        ("motional_units.csv", "motional_unit,sites\nU1,A/9\n", "sites.csv lacks"),
    ],
)
def test_damaged_folders_are_refused(two_folders, file, content, message):
    path = two_folders[0] / file
    path.unlink()
    if content is not None:
        path.write_text(content, encoding="utf-8")
    with pytest.raises(FileProblemError, match=message):
        compare_folders(two_folders)


def test_one_folder_is_not_enough(two_folders):
    with pytest.raises(ValueError, match="two or more"):
        compare_folders(two_folders[:1])
