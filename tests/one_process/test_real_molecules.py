"""Whole molecules that were measured, through the command, in words."""

import csv

import pytest

from structmap.cli import main

NANO = 1e-9
RATES = "auth_seq_id,R1,R1_error,R2,R2_error,NOE,NOE_error"


def judge(path, folder, capsys, *more):
    out = folder / "one_process.csv"
    call = ["one-process", str(path), "--model", "model-free", "-o", str(out)]
    assert main([*call, "--proton-frequency-megahertz", "600", *more]) == 0
    with out.open(encoding="utf-8", newline="") as file:
        (row,) = csv.DictReader(file)
    return row, capsys.readouterr().out


def test_t4_lysozyme_is_not_one_process_at_the_stated_errors(
    data_folder, tmp_path, capsys
):
    path = data_folder / "public" / "t4_lysozyme" / "600Mhz-R1R2NOE.dat"
    row, said = judge(path, tmp_path, capsys, "--columns", RATES)
    # The median of R2/R1 over rigid sites gives 10.51 ns, and the README of the data
    # set D(iso) = 1.59025e7 s-1, which is 10.48 ns.
    assert float(row["value"]) == pytest.approx(10.5 * NANO, rel=0.01)
    assert row["verdict"] == "distinct"
    assert "One value does not explain these 114 sites (chance 0.001)" in said
    # The README gives chi-square 2492 over 118 sites, reduced 21.9, for an axially
    # symmetric tensor (D parallel over D perpendicular 1.32) fitted to R2/R1. One
    # isotropic time leaves more: it cannot take up how the rate depends on the
    # direction of the bond, and R1 and R2 enter here with their own errors and one
    # amplitude a site instead of one ratio.
    assert "8.0 times as widely as their stated errors allow" in said
    reduced = float(said.split("reduced chi-square ")[1].split(")")[0])
    assert reduced == pytest.approx(63.6, rel=0.01)
    assert "108, R1 at 600 MHz: 18.4 errors off" in said
    assert "2 sites with a NOE below 0.65 are left out: mobile." in said


def test_trp_repressor_has_the_known_time(data_folder, tmp_path, capsys):
    path = data_folder / "public" / "trp_repressor" / "trp_repressor_600.csv"
    row, said = judge(path, tmp_path, capsys)
    # Median (quartiles) from R2/R1 over rigid sites: 10.02 (9.71 to 10.60) ns.
    assert float(row["value"]) == pytest.approx(10.02 * NANO, rel=0.01)
    assert row["verdict"] == "shared by a subset"
    assert "One value explains all but 22, 27, " in said
    assert "tau 9.99 ns (9.89 ns to 10.1 ns)" in said
    assert "13 sites with a NOE below 0.65 are left out: mobile." in said
