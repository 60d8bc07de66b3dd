import csv
import hashlib
import json
from pathlib import Path

import gemmi
import numpy as np
import pandas as pd
import pytest

import structmap
from structmap.analysis import analyse_example
from structmap.cli import main
from structmap.errors import StructmapError

EXAMPLES = Path(__file__).parent.parent / "examples"
FILES = [
    "contacts.csv",
    "mapped.cif",
    "motional_units.csv",
    "page.html",
    "run.json",
    "sites.csv",
]
INPUTS = ["4cup.cif.gz", "invented_values.csv", "settings.toml"]
# The planted truth, as examples/make_example.py tells it.
LOOP = {1890, 1891, 1893, 1894, 1895, 1896, 1897, 1898, 1900, 1901}
ACROSS = {1916, 1919, 1920, 1922, 1955, 1956, 1959, 1960}
HINGE = {1944, 1945, 1946, 1947, 1948, 1950}


@pytest.fixture(scope="module")
def example(tmp_path_factory):
    folder = tmp_path_factory.mktemp("example") / "out"
    return analyse_example(folder), folder


def members(table, row):
    return {int(name.split("/")[1]) for name in table.loc[row, "sites"].split()}


def jaccard(one, other):
    return len(one & other) / len(one | other)


def best_match(units, planted):
    return max(units.index, key=lambda row: jaccard(members(units, row), planted))


def test_writes_just_the_files_of_the_design(example):
    _, folder = example
    written = sorted(path.name for path in folder.iterdir())
    assert written == sorted([*FILES, *INPUTS, "one_process.csv"])


def test_tables_have_the_columns_of_the_design(example):
    _, folder = example
    heads = {
        name: (folder / name).read_text().split("\n")[0]
        for name in FILES
        if "csv" in name
    }
    assert heads["sites.csv"] == (
        "site,auth_asym_id,auth_seq_id,pdbx_PDB_ins_code,auth_comp_id,atom,copies,value,"
        "value_error,deviation,moves,motional_unit,membership_probability,edge_filter_unit,"
        "touches_lattice,lattice_partners,relative_exposure,contact_number,"
        "mate_distance_angstrom,secondary_structure,note"
    )
    assert heads["motional_units.csv"] == (
        "motional_unit,n_sites,sites,energy,verdict,p_any,p_place,p_smooth,stability,contrast,"
        "lattice_verdict,lattice_operators,share_kept_without_lattice,pieces_without_lattice,"
        "share_by_lattice_alone,"
        "joining_distance_chain,joining_distance_complex,joining_distance_lattice,one_process,"
        "parameter,parameter_low,parameter_high,plain_words"
    )
    assert heads["contacts.csv"] == (
        "auth_asym_id_1,auth_seq_id_1,pdbx_PDB_ins_code_1,auth_comp_id_1,auth_asym_id_2,"
        "auth_seq_id_2,pdbx_PDB_ins_code_2,auth_comp_id_2,kind,operator,shift_a,shift_b,shift_c,"
        "assembly_operator,ncs_1,ncs_2,distance_angstrom,atom_1,atom_2,chemistry"
    )


def test_sites_that_touch_a_neighbour_lie_within_the_cutoff_of_one(example):
    sites = pd.read_csv(example[1] / "sites.csv")
    near = sites["mate_distance_angstrom"] <= 4.5
    assert (near == (sites["touches_lattice"] == "yes")).all()
    assert (sites["contact_number"] > 0).all()
    assert {"H"} <= set(sites["secondary_structure"].dropna()) <= {"H", "E"}


def test_the_planted_loop_is_found_inside_the_molecule(example):
    units = example[0].motional_units
    row = best_match(units, LOOP)
    assert jaccard(members(units, row), LOOP) >= 0.8
    assert units.loc[row, "lattice_verdict"] == "internal"
    assert units.loc[row, "share_kept_without_lattice"] == 1


def test_the_unit_planted_across_a_crystal_contact_is_called_so(example):
    units = example[0].motional_units
    row = best_match(units, ACROSS)
    assert jaccard(members(units, row), ACROSS) >= 0.8
    assert units.loc[row, "lattice_verdict"] in ("lattice-joined", "lattice-only")
    assert units.loc[row, "lattice_operators"]
    assert 0 < units.loc[row, "share_by_lattice_alone"] <= 1
    assert units.loc[row, "joining_distance_lattice"] <= 4.5
    assert not units.loc[row, "joining_distance_complex"] <= 4.5


def test_the_hinge_outside_the_window_is_in_no_unit(example):
    sites = example[0].sites
    hinge = sites[sites["auth_seq_id"].isin(HINGE)]
    assert len(hinge) == len(HINGE)
    assert hinge["motional_unit"].isna().all()


def test_the_field_near_the_resonance_is_left_out_and_said(example):
    record = example[0].record
    assert [bool(reason) for reason in record.measurements.point_reason] == [
        False
    ] * 12 + [True]
    run = json.loads((example[1] / "run.json").read_text())
    assert run["counts"]["points_left_out"] == 1


def test_same_input_gives_the_same_bytes(example, tmp_path):
    _, folder = example
    analyse_example(tmp_path / "elsewhere")
    for name in FILES:
        again = (tmp_path / "elsewhere" / name).read_bytes()
        assert again == (folder / name).read_bytes(), name


def test_run_record_holds_sums_of_the_inputs_and_no_path(example):
    _, folder = example
    text = (folder / "run.json").read_text()
    run = json.loads(text)
    for name in INPUTS[:2]:
        assert (
            run["inputs_sha256"][name]
            == hashlib.sha256((EXAMPLES / name).read_bytes()).hexdigest()
        )
    assert str(folder) not in text
    assert str(EXAMPLES) not in text
    assert run["settings"]["mas_rate_hertz"] == 60000
    assert run["structmap"] == structmap.__version__


def test_mapped_coordinates_carry_the_values(example):
    result, folder = example
    block = gemmi.cif.read(str(folder / "mapped.cif")).sole_block()
    table = block.find("_structmap_site.", ["auth_seq_id", "value", "motional_unit"])
    mapped = {int(row[0]): (float(row[1]), row[2]) for row in table}
    sites = result.sites.set_index("auth_seq_id")
    assert set(mapped) == set(sites.index)
    model = gemmi.read_structure(str(folder / "mapped.cif"))[0]
    before = gemmi.read_structure(str(EXAMPLES / "4cup.cif.gz"))[0]
    assert model.count_atom_sites() == before.count_atom_sites()
    for residue in model["A"].get_polymer():
        expected = sites["value"].get(residue.seqid.num, 0.0)
        assert residue[0].b_iso == pytest.approx(expected, abs=0.005)
        if residue.seqid.num in mapped:
            assert mapped[residue.seqid.num][0] == pytest.approx(expected, rel=1e-5)


def test_library_use(tmp_path):
    result = structmap.analyse(
        EXAMPLES / "4cup.cif.gz",
        EXAMPLES / "invented_values.csv",
        structmap.Settings(seed=1),
    )
    for table in (result.sites, result.motional_units, result.contacts):
        assert isinstance(table, pd.DataFrame)
    assert len(result.sites) == 102
    shown = result._repr_html_()
    assert shown.startswith('<iframe sandbox="allow-scripts"')
    assert "<script" not in shown
    assert result.save(tmp_path / "saved") == tmp_path / "saved"


def test_coordinates_that_changed_since_are_not_mapped(tmp_path):
    copy = tmp_path / "4cup.cif.gz"
    copy.write_bytes((EXAMPLES / "4cup.cif.gz").read_bytes())
    result = structmap.analyse(copy, EXAMPLES / "invented_values.csv")
    copy.write_bytes(b"other")
    with pytest.raises(
        StructmapError, match=r"4cup\.cif\.gz: changed since it was analysed"
    ):
        result.save(tmp_path / "out")
    assert not (tmp_path / "out").exists()


def made_up_values(structure, path):
    """Write values for every polymer residue of a file; tell whether there are any."""
    rng = np.random.default_rng(11)
    seen, rows = set(), []
    for chain in structure[0]:
        for residue in chain.get_polymer():
            key = (chain.name, str(residue.seqid))
            if key not in seen:
                seen.add(key)
                rows.append((*key, f"{rng.normal(10, 1):.3f}", "1.0"))
    with path.open("w", newline="") as handle:
        csv.writer(handle).writerows([("chain", "residue", "R2", "R2_error"), *rows])
    return bool(rows)


def test_every_file_of_the_data_folder_ends_in_a_result_or_one_line(
    data_folder, tmp_path, capsys
):
    paths = [
        path
        for path in sorted(data_folder.rglob("*"))
        if path.name.split(".")[1:2] in (["pdb"], ["cif"], ["ent"], ["json"])
    ]
    assert len(paths) > 40
    for path in paths:
        contacts = main(
            ["contacts", str(path), "-o", str(tmp_path / "c.csv"), "--quiet"]
        )
        assert contacts == (1 if path.name == "pdb1gdr.ent" else 0), path.name
        caught = capsys.readouterr()
        assert caught.out == ""
        assert len(caught.err.splitlines()) == contacts


SMALL = [
    "1as5.cif.gz",
    "1lzh.pdb.gz",
    "1orc.pdb",
    "1pfe.cif.gz",
    "1yjp.cif",
    "3jqh.cif",
    "5a7u.pdb",
]
MORE = [
    "1lcd.cif.gz",
    "2n0n_m1.pdb",
    "4oz7.pdb",
    "5i55.cif",
    "7etn.cif.gz",
    "3wup.json.gz",
    "6wqa.cif.gz",
]


@pytest.mark.parametrize("name", SMALL + MORE)
def test_analyses_with_made_up_values_on_odd_files(data_folder, tmp_path, name):
    path = data_folder / "archive" / name
    structure = gemmi.read_structure(str(path))
    structure.setup_entities()
    assert made_up_values(structure, tmp_path / "values.csv")
    call = [
        "analyse",
        str(path),
        str(tmp_path / "values.csv"),
        "-o",
        str(tmp_path / "out"),
    ]
    assert main([*call, "--quiet"]) == 0
    assert sorted(found.name for found in (tmp_path / "out").iterdir()) == FILES
