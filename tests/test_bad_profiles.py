"""Profiles and shift lists that cannot be used: one line, what, where, what to do."""

import numpy as np
import pytest

from structmap.cli import main

GOOD_X = (1, 2, 3, 4, 5, 6)
HEAD = "auth_seq_id,x [s],value [s-1],error"


def profiles(folder, x=GOOD_X, *, head=HEAD, error=0.03, name="decay.csv"):
    rng = np.random.default_rng(1)
    lines = [head]
    for site in range(1, 7):
        for place in x:
            value = 1 + np.exp(-0.5 * abs(place)) + 0.03 * rng.standard_normal()
            lines.append(f"{site},{place},{value:.4f},{error}")
    path = folder / name
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def refused(capsys, *words):
    """Run a call that cannot be done; return its one line."""
    assert main([str(word) for word in words]) == 1
    caught = capsys.readouterr()
    assert caught.out == ""
    (line,) = caught.err.splitlines()
    return line.removeprefix("structmap: ")


@pytest.fixture
def judge(tmp_path, capsys):
    """Return a function that asks for one process and returns the refusal."""

    def run(path, *words, model="exponential"):
        line = refused(capsys, "one-process", path, "--model", model, *words)
        return line.replace(f"{tmp_path}/", "")

    return run


@pytest.mark.parametrize(
    ("x", "more", "said"),
    [
        (
            (-1, 1, 2, 3, 4, 5),
            {},
            "decay.csv, x of value: -1 s is below 0; correct or remove that point",
        ),
        (
            (1, 1, 2, 3, 4, 5),
            {},
            "decay.csv, rows 2 and 3: both give site 1 at x = 1; keep one of them",
        ),
        (
            (1, 2, 3),
            {},
            "decay.csv, x of value: 3 points for 3 parameters a site; exponential "
            "needs at least 5 points",
        ),
        (
            GOOD_X,
            {"head": "auth_seq_id,x [cups],value [s-1],error"},
            "decay.csv, x of value: the unit 'cups' cannot be used where one like s "
            "is needed; write the unit in brackets after the column name",
        ),
        (
            GOOD_X,
            {"head": "auth_seq_id,x [kHz],value [s-1],error"},
            "decay.csv, x of value: the unit 'kHz' cannot be used where one like s",
        ),
        (
            GOOD_X,
            {"head": "auth_seq_id,x,value,error"},
            "decay.csv, x of value: no unit is given where one like s is needed; write",
        ),
        (
            GOOD_X,
            {"error": -0.03},
            "decay.csv, row 2",
        ),
        ((), {}, "decay.csv"),
    ],
    ids=[
        *("negative", "twice", "too few", "unknown unit", "other unit", "no unit"),
        *("negative error", "empty"),
    ],
)
def test_a_bad_profile_is_refused_in_one_line(tmp_path, judge, x, more, said):
    assert judge(profiles(tmp_path, x, **more)).startswith(said)


def test_a_model_says_which_condition_it_lacks(tmp_path, judge, capsys, repository):
    path = profiles(
        tmp_path, (12, 15, 20, 25, 30, 35), head="auth_seq_id,x [kHz],value,error"
    )
    said = (
        "model mas-r1rho: the rate of magic-angle spinning is missing; set "
        "mas_rate_hertz in the settings or give --mas-rate-hertz"
    )
    assert judge(path, model="mas-r1rho") == said
    out = tmp_path / "out"
    call = ["analyse", repository / "examples" / "4cup.cif.gz", path, "-o", out]
    line = refused(capsys, *call, "--model", "mas-r1rho", "--offset", "1855")
    assert line == said
    assert not out.exists()


def test_a_spinning_rate_that_leaves_no_point_is_refused(tmp_path, judge):
    path = profiles(
        tmp_path, (1, 2, 3, 4, 5, 6), head="auth_seq_id,x [kHz],value,error"
    )
    line = judge(path, "--mas-rate-hertz", "60000", model="mas-r1rho")
    assert line.startswith(
        "decay.csv: only 0 of 6 points of value are left (below 10 kHz: coherent); "
    )


def test_no_model_and_an_unknown_one_are_refused(tmp_path, judge, capsys):
    path = profiles(tmp_path)
    assert judge(path, model="decay").startswith(
        "model 'decay' is not known; take one of mas-r1rho, exchange-r1rho, cpmg, "
    )
    line = refused(capsys, "one-process", path)
    assert line == "options: setting model is not given; name one with --model"


def test_a_quantity_that_is_no_profile_is_refused(tmp_path, judge):
    line = judge(profiles(tmp_path), "--process-quantity", "R2")
    assert line.startswith("decay.csv: quantity R2 is no profile; give one row a point")


def test_errors_of_zero_are_told_and_estimated(tmp_path, capsys):
    path = profiles(tmp_path, error=0)
    assert main(["one-process", str(path), "--model", "exponential"]) == 0
    said = capsys.readouterr().err
    assert "decay.csv: value has 36 errors of 0, taken as not given." in said
    assert "No errors are given; the scatter about the fits gives 0.0" in said


def test_errors_of_zero_with_too_few_points_are_refused(tmp_path, judge):
    head = "auth_seq_id,x [uM],value [ppm],error"
    path = profiles(tmp_path, (0, 10, 20), head=head, error=0)
    line = judge(path, model="binding")
    assert line.startswith("decay.csv, x of value: 3 points for 3 parameters a site")


# --- sets of one name, damaged lists --------------------------------------------------


def test_two_columns_of_one_name_are_refused(tmp_path, judge):
    path = tmp_path / "wide.csv"
    path.write_text("auth_seq_id,R1,R1\n1,2,3\n2,3,4\n", encoding="utf-8")
    assert judge(path) == (
        "wide.csv: columns 'R1', 'R1' have the same name; give each its own name"
    )


def test_columns_that_give_one_x_twice_are_refused(tmp_path, judge):
    path = tmp_path / "wide.csv"
    path.write_text(
        "auth_seq_id,R1rho_20kHz,R1rho_20kHz,R1rho_30kHz\n1,2,3,4\n2,3,4,5\n",
        encoding="utf-8",
    )
    line = judge(path, "--mas-rate-hertz", "60000", model="mas-r1rho")
    assert line.startswith("wide.csv: columns 'R1rho_20kHz', 'R1rho_20kHz' have the")


def test_a_table_given_twice_is_refused(tmp_path, capsys):
    path = profiles(tmp_path)
    line = refused(capsys, "one-process", path, path, "--model", "exponential")
    assert line.endswith("has the content of a file before it; name each file once")


SHIFTS = """data_x
save_a
_Assigned_chem_shift_list.Sf_category assigned_chemical_shifts
loop_
_Atom_chem_shift.Seq_ID
_Atom_chem_shift.Comp_ID
_Atom_chem_shift.Atom_ID
_Atom_chem_shift.Val
1 ALA H 8.1
2 ALA H{}
stop_
save_
"""


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (SHIFTS.format(""), "is a broken or truncated NMR-STAR file ("),
        (SHIFTS.format(" high"), "row 2: a Val is 'high'; write a number"),
        (SHIFTS.split("stop_", maxsplit=1)[0].format(" 8.0"), "is a broken or trunc"),
    ],
    ids=["cell missing", "text", "truncated"],
)
def test_a_star_file_with_a_broken_loop_is_refused(tmp_path, capsys, content, said):
    pytest.importorskip("pynmrstar")
    path = tmp_path / "free.str"
    path.write_text(content, encoding="utf-8")
    out = tmp_path / "out.csv"
    line = refused(capsys, "shifts", path, path, "-o", out)
    assert line.startswith(f"{path}")
    assert said in line
    assert not out.exists()
