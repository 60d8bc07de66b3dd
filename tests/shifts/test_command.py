"""From shift lists through the command to the analyses that read its tables."""

import csv
import shutil
from pathlib import Path

import numpy as np
import pytest

from structmap.cli import main
from structmap.values import read_values

EXAMPLES = Path(__file__).parent.parent.parent / "examples"
LIGAND, KD = np.array([0.0, 50.0, 100.0, 200.0, 400.0, 800.0]), 120.0


def shift_file(path, rows, *, header="auth_seq_id,auth_comp_id,H,N"):
    lines = [header, *(",".join(str(cell) for cell in row) for row in rows)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def invented(folder, share, *, name, numbers=range(1, 13), moved=range(4, 9)):
    """Write shifts of residues of which some move by a share of their full change."""
    rng = np.random.default_rng(list(name.encode()))
    rows = []
    for number in numbers:
        step = share * (0.3 + 0.05 * (number % 5)) if number in moved else 0.0
        noise = 0.001 * rng.standard_normal()
        proton, nitrogen = 8 + 0.02 * number + step + noise, 115 + 0.3 * number
        rows.append((number, "ALA", f"{proton:.5f}", f"{nitrogen:.4f}"))
    return shift_file(folder / name, rows)


def run(*words):
    return main([str(word) for word in words])


def rows_of(path):
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def refused(capsys, *words):
    assert run(*words) == 1
    caught = capsys.readouterr()
    (line,) = caught.err.splitlines()
    return line


def test_a_titration_goes_on_to_the_dissociation_constant(tmp_path, capsys):
    shares = LIGAND / (LIGAND + KD)  # fast exchange, ligand in excess
    files = [
        invented(tmp_path, share, name=f"at{number}.csv", moved=range(3, 11))
        for number, share in enumerate(shares)
    ]
    out = tmp_path / "titration.csv"
    x = ",".join(f"{value:g}" for value in LIGAND)
    assert run("shifts", *files, "--x", x, "--x-unit", "uM", "-o", out) == 0
    assert "Weights of the nuclei: H 1, N 0.14 (0.20 in glycine)." in (
        capsys.readouterr().out
    )
    assert len(rows_of(out)) == 12 * len(LIGAND)
    verdicts = tmp_path / "verdicts.csv"
    assert run("one-process", out, "--model", "binding", "-o", verdicts) == 0
    found = rows_of(verdicts)[0]
    assert found["verdict"] == "shared"
    assert float(found["value"]) == pytest.approx(KD * 1e-6, rel=0.05)
    assert float(found["low"]) < KD * 1e-6 < float(found["high"])


def test_a_perturbation_goes_on_to_analyse(tmp_path):
    # The table of the example gives numbers that fit its coordinates.
    numbers = read_values([EXAMPLES / "invented_values.csv"]).auth_seq_id
    moved = range(35, 47)
    free, bound = (
        invented(tmp_path, share, name=name, numbers=numbers, moved=moved)
        for share, name in ((0.0, "free.csv"), (1.0, "bound.csv"))
    )
    table, out = tmp_path / "perturbation.csv", tmp_path / "out"
    assert run("shifts", free, bound, "-o", table) == 0
    call = [EXAMPLES / "4cup.cif.gz", table, "-o", out, "--most-permutations", "0"]
    assert run("analyse", *call, "--offset", "1855") == 0
    (unit,) = rows_of(out / "motional_units.csv")
    members = {int(site.split("/")[1]) - 1855 for site in unit["sites"].split()}
    assert members == set(moved) & set(numbers.tolist())


def test_weights_decide_what_a_nucleus_counts(tmp_path):
    free = shift_file(tmp_path / "free.csv", [(1, "ALA", 8.0, 120), (2, "GLY", 8, 110)])
    bound = shift_file(tmp_path / "b.csv", [(1, "ALA", 8.0, 121), (2, "GLY", 8, 111)])
    out = tmp_path / "out.csv"
    for words, expected in (
        ((), (0.14, 0.20)),
        (("--weights", "H=1,N=0.5"), (0.5, 0.5)),
    ):
        assert run("shifts", free, bound, "-o", out, *words) == 0
        found = [float(row["shift_change [ppm]"]) for row in rows_of(out)]
        assert found == pytest.approx(np.array(expected) / np.sqrt(2), rel=1e-5)
    assert run("shifts", free, bound, "-o", out, "--weights", "N=1") == 0
    assert float(rows_of(out)[0]["shift_change [ppm]"]) == pytest.approx(1.0)


def test_two_peaks_of_a_residue_become_a_population(tmp_path):
    free = shift_file(tmp_path / "free.csv", [(1, "ALA", 8.0, 120), (2, "ALA", 8, 110)])
    header = "auth_seq_id,auth_comp_id,H,N,H_B,N_B,height,height_B"
    bound = shift_file(
        tmp_path / "bound.csv",
        [(1, "ALA", 8.0, 120, 8.2, 122, 3, 1), (2, "ALA", 8.1, 110, "", "", 4, "")],
        header=header,
    )
    out = tmp_path / "out.csv"
    assert run("shifts", free, bound, "-o", out) == 0
    assert [row["population"] for row in rows_of(out)] == ["0.75", ""]


# --- real lists -----------------------------------------------------------------------


@pytest.mark.parametrize(
    ("path", "least"),
    [
        ("nmrstar/bmr16656.str", 55),
        ("nmrstar/bmr16570.str", 75),
        ("nef/2kpu.nef.gz", 75),
    ],
)
def test_a_real_list_does_not_differ_from_itself(data_folder, tmp_path, path, least):
    pytest.importorskip("pynmrstar")
    first = data_folder / "public" / path
    second = tmp_path / f"copy_{first.name}"
    shutil.copy(first, second)
    out = tmp_path / "out.csv"
    assert run("shifts", first, second, "-o", out) == 0
    changes = [row["shift_change [ppm]"] for row in rows_of(out)]
    assert changes.count("0") >= least
    assert set(changes) <= {"0", ""}


def test_residues_moved_in_a_copy_of_a_real_list_are_found(data_folder, tmp_path):
    pytest.importorskip("pynmrstar")
    real = data_folder / "public" / "nmrstar" / "bmr16570.str"
    table = read_values([real])
    names = {one.name: one.value[:, 0] for one in table.quantities}
    rng = np.random.default_rng(3)
    moved = {30, 32, 33, 34}
    rows = [
        (
            number,
            f"{names['shift_H'][row] + 0.4 * (number in moved) + 0.003 * one:.4f}",
            f"{names['shift_N'][row] + 0.003 / 0.14 * two:.4f}",
        )
        for row, (number, (one, two)) in enumerate(
            zip(
                table.auth_seq_id,
                rng.standard_normal((len(table.line), 2)),
                strict=True,
            )
        )
        if np.isfinite(names["shift_H"][row] + names["shift_N"][row])
    ]
    copy = shift_file(tmp_path / "moved.csv", rows, header="auth_seq_id,H,N")
    out = tmp_path / "out.csv"
    assert run("shifts", real, copy, "-o", out) == 0
    strong = {int(r["auth_seq_id"]) for r in rows_of(out) if "strong" in r["note"]}
    assert strong == moved


# --- several lists in a file ----------------------------------------------------------


def star_of_two(path, *, second="bound"):
    loop = """loop_
 _Atom_chem_shift.Seq_ID
 _Atom_chem_shift.Comp_ID
 _Atom_chem_shift.Atom_ID
 _Atom_chem_shift.Val
"""
    frames = []
    for name, change in (("free", 0.0), (second, 0.1)):
        rows = [
            f"{n} ALA {atom} {shift + n + (change if n == 2 else 0)}"
            for n in (1, 2, 3)
            for atom, shift in (("H", 7.0), ("N", 110.0))
        ]
        frames.append(
            f"save_{name}\n_Assigned_chem_shift_list.Sf_category "
            f"assigned_chemical_shifts\n{loop}" + "\n".join(rows) + "\nstop_\nsave_\n"
        )
    path.write_text("data_two\n" + "\n".join(frames), encoding="utf-8")
    return path


@pytest.mark.parametrize("names", ["free,bound", "1,2"])
def test_one_list_of_each_file_is_picked(tmp_path, names, capsys):
    pytest.importorskip("pynmrstar")
    both = star_of_two(tmp_path / "two.str")
    out = tmp_path / "out.csv"
    assert run("shifts", both, both, "--list", names, "-o", out) == 0
    assert "two.str: shift list bound taken." in capsys.readouterr().out
    changes = [float(row["shift_change [ppm]"]) for row in rows_of(out)]
    expected = np.sqrt((0.1**2 + 0.014**2) / 2)
    assert changes == pytest.approx([0, expected, 0], rel=1e-5)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ((), "two.str: holds several shift lists (free, bound); name one with --list"),
        (("--list", "free,3"), "two.str: there is no shift list 3 (it holds free, bou"),
        (
            ("--list", "free"),
            "options: setting list names 1 lists for 2 files; give one a fil",
        ),
    ],
)
def test_a_list_that_is_not_named_is_refused(tmp_path, capsys, words, said):
    pytest.importorskip("pynmrstar")
    both = star_of_two(tmp_path / "two.str")
    line = refused(capsys, "shifts", both, both, "-o", tmp_path / "o.csv", *words)
    assert said in line


def test_two_lists_of_one_name_are_refused(tmp_path, capsys):
    pytest.importorskip("pynmrstar")
    both = star_of_two(tmp_path / "two.str", second="free")
    line = refused(capsys, "shifts", both, both, "-o", tmp_path / "out.csv")
    assert line.startswith(f"structmap: {both}: ")
    assert "free" in line


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (
            ("--x", "0,50"),
            "options: setting x is 0, 50; give 3 rising values of 0 or more",
        ),
        (("--x", "0,50,50"), "options: setting x is 0, 50, 50; give 3 rising values"),
        (("--x=-5,0,50",), "options: setting x is -5, 0, 50; give 3 rising values"),
        (("--x", "0,50,90"), "--x-unit: no unit is given where one like Hz, kHz"),
        (("--x", "0,5,9", "--x-unit", "cup"), "--x-unit: "),
        (
            ("--weights", "H=0"),
            "options: setting weights of H is not; give numbers above 0",
        ),
        (("--weights", "CX=1"), "there are no shifts of CX that all lists have"),
    ],
)
def test_choices_that_do_not_fit_are_refused(tmp_path, capsys, words, said):
    files = [
        invented(tmp_path, share, name=f"{n}.csv")
        for n, share in enumerate((0, 0.5, 1))
    ]
    line = refused(capsys, "shifts", *files, "-o", tmp_path / "out.csv", *words)
    assert said in line
    assert not (tmp_path / "out.csv").exists()


@pytest.mark.parametrize("words", [("--x", "0;5"), ("--weights", "H:1")])
def test_words_that_are_no_numbers_are_a_wrong_call(tmp_path, words, capsys):
    with pytest.raises(SystemExit) as ended:
        run("shifts", "a.csv", "b.csv", "-o", tmp_path / "out.csv", *words)
    assert ended.value.code == 2
    assert "is not a list of" in capsys.readouterr().err
