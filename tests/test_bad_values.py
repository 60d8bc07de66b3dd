"""Values from which little or nothing can be told: plain sentences, whole outputs."""

import csv
import json

import gemmi
import numpy as np
import pytest

from structmap.cli import main

FILES = [
    "contacts.csv",
    "mapped.cif",
    "motional_units.csv",
    "page.html",
    "run.json",
    "sites.csv",
]
HEAD = ["residue", "R2", "R2_error"]
PROFILE_HEAD = ["residue", "x", "value", "error"]


def residues_of_1orc(repository):
    structure = gemmi.read_structure(str(repository / "tests" / "data" / "1orc.pdb"))
    return [str(r.seqid) for r in structure[0]["A"].get_polymer()]


@pytest.fixture
def analyse(repository, tmp_path, capsys):
    """Return a function that analyses rows on 1ORC and reads what was written."""

    def run(head, rows, *options, coordinates="tests/data/1orc.pdb"):
        out = tmp_path / "out"
        call = ["analyse", str(repository / coordinates)]
        call += [str(write(tmp_path, head, rows)), "-o", str(out)]
        status = main([*call, *options])
        caught = capsys.readouterr()
        assert status == 0, caught.err
        assert caught.err == ""
        return Written(out, caught.out)

    return run


@pytest.fixture
def refused(repository, tmp_path, capsys):
    """Return a function that analyses rows that cannot be used, and what it said."""

    def run(head, rows):
        out = tmp_path / "out"
        call = ["analyse", str(repository / "tests/data/1orc.pdb")]
        status = main([*call, str(write(tmp_path, head, rows)), "-o", str(out)])
        caught = capsys.readouterr()
        assert (status, caught.out, out.exists()) == (1, "", False)
        assert len(caught.err.splitlines()) == 1
        return caught.err

    return run


def write(folder, head, rows):
    path = folder / "values.csv"
    with path.open("w", newline="") as handle:
        csv.writer(handle).writerows([head, *rows])
    return path


class Written:
    """The files of a run, read back and looked over."""

    def __init__(self, folder, summary):
        assert sorted(path.name for path in folder.iterdir()) == FILES
        self.summary = summary
        self.run = json.loads((folder / "run.json").read_text())
        self.sites = read_rows(folder / "sites.csv")
        self.units = read_rows(folder / "motional_units.csv")
        self.page = (folder / "page.html").read_text()
        gemmi.read_structure(str(folder / "mapped.cif"))
        for rows in (self.sites, self.units):
            assert not any("nan" in row.values() for row in rows)
        for name in ("page.html", "run.json"):
            assert "NaN" not in strip_scripts((folder / name).read_text())

    @property
    def reason(self):
        return self.run["warnings"][0]


def strip_scripts(text):
    """Leave out the 3D library, which speaks of NaN for reasons of its own."""
    parts = text.split("<script")
    return parts[0] + "".join(part.split("</script>", 1)[-1] for part in parts[1:])


def read_rows(path):
    with path.open(newline="") as handle:
        return list(csv.DictReader(handle))


def plain_values(repository, n_sites=None, error="1.0"):
    rng = np.random.default_rng(3)
    names = residues_of_1orc(repository)[:n_sites]
    return [[name, f"{rng.normal(10, 1):.3f}", error] for name in names]


def test_errors_of_zero_count_as_not_given(analyse, repository):
    found = analyse(HEAD, plain_values(repository, error="0"))
    assert "The values came without errors; one common error" in found.page
    assert len(found.sites) == 64


def test_equal_values_tell_no_unit(analyse, repository):
    rows = [[name, "5.0", "0.1"] for name in residues_of_1orc(repository)]
    found = analyse(HEAD, rows)
    assert found.reason == "No unit can be told: all values are equal."
    assert found.reason in found.summary
    assert found.reason in found.page
    assert found.units == []
    assert {row["moves"] for row in found.sites} == {"no"}


def test_equal_values_without_errors_tell_no_unit(analyse, repository):
    rows = [[name, "5.0", ""] for name in residues_of_1orc(repository)]
    found = analyse(HEAD, rows)
    assert found.reason == "No unit can be told: all values are equal."
    assert "none could be estimated" in found.page


@pytest.mark.parametrize(("n_sites", "said"), [(1, "one site"), (2, "two sites")])
def test_fewer_sites_than_a_unit_needs(analyse, repository, n_sites, said):
    found = analyse(HEAD, plain_values(repository, n_sites), "--offset", "0")
    expected = f"No unit can be told: only {said} to compare; a unit needs three."
    assert found.reason == expected
    assert expected in found.page
    assert len(found.sites) == n_sites
    assert found.units == []


def test_sites_that_do_not_touch_tell_no_unit(analyse, repository):
    found = analyse(HEAD, plain_values(repository), "--cutoff-angstrom", "0.5")
    assert (
        found.reason == "No unit can be told: no two measured sites touch each other."
    )
    assert found.units == []
    assert read_numbers(found.sites, "deviation")


def read_numbers(rows, column):
    return [float(row[column]) for row in rows if row[column]]


@pytest.mark.parametrize("part", ["auto", "shape", "level"])
def test_a_profile_of_one_point_is_a_value(analyse, repository, part):
    rows = [
        [name, "5", value, error] for name, value, error in plain_values(repository)
    ]
    found = analyse(PROFILE_HEAD, rows, "--profile-part", part)
    assert len(read_numbers(found.sites, "value")) == 64
    assert len(read_numbers(found.sites, "deviation")) == 64


@pytest.mark.parametrize("missing", ["nan", "", "NA"])
def test_no_value_at_all_is_refused_in_one_line(refused, repository, missing):
    rows = [[name, missing, "0.1"] for name in residues_of_1orc(repository)]
    assert "no column holds a measured value" in refused(HEAD, rows)
    points = [[name, x, missing, "0.1"] for name, *_ in rows for x in ("1", "2", "3")]
    assert "no column holds a measured value" in refused(PROFILE_HEAD, points)


def test_a_quantity_that_is_missing_everywhere_is_left_out_and_said(
    analyse, repository
):
    rows = [
        [name, value, error, "", "0.1"]
        for name, value, error in plain_values(repository)
    ]
    found = analyse([*HEAD, "R1", "R1_error"], rows)
    assert "R1" not in found.sites[0]
    assert any("'R1' holds no numbers" in note for note in found.run["notes"])


def test_profiles_that_lack_most_points_tell_no_unit(analyse, repository):
    rows = [
        [name, x, "9.0" if x == k % 3 else "", "0.1"]
        for k, name in enumerate(residues_of_1orc(repository))
        for x in range(3)
    ]
    found = analyse(PROFILE_HEAD, rows)
    assert found.reason == "No unit can be told: no site has enough values to compare."
    assert found.reason in found.page
    assert {row["deviation"] for row in found.sites} == {""}
    assert {row["moves"] for row in found.sites} <= {"", "no"}


def test_a_single_wild_value_does_not_sink_the_rest(analyse, repository):
    rows = plain_values(repository)
    rows[10][1] = "1e9"
    found = analyse(HEAD, rows)
    moving = [row["site"] for row in found.sites if row["moves"] == "yes"]
    assert moving == [found.sites[10]["site"]]
    assert 0.5 < found.run["error_scale"] < 2


def test_twenty_sites_work(analyse, repository):
    rows = plain_values(repository, 20)
    for row in rows[8:13]:
        row[1] = f"{float(row[1]) + 30:.3f}"
    found = analyse(HEAD, rows, "--offset", "0")
    assert "Only 20 sites are measured" in " ".join(found.run["warnings"])
    moving = {row["site"] for row in found.sites if row["moves"] == "yes"}
    assert moving == {row["site"] for row in found.sites[8:13]}


@pytest.mark.parametrize("name", ["1pfe.cif.gz", "4oz7.pdb"])
def test_nucleic_acids_and_several_chains_work(analyse, repository, name):
    structure = gemmi.read_structure(str(repository / "tests" / "data" / name))
    structure.setup_entities()
    rng = np.random.default_rng(8)
    rows = {
        (chain.name, str(residue.seqid)): f"{rng.normal(10, 1):.3f}"
        for chain in structure[0]
        for residue in chain.get_polymer()
    }
    found = analyse(
        ["chain", *HEAD],
        [[*key, value, "1.0"] for key, value in rows.items()],
        coordinates=f"tests/data/{name}",
    )
    assert len(found.sites) == len(rows)
    assert len(read_numbers(found.sites, "deviation")) == len(rows)
