"""Spin-lock profiles at several spinning rates and fields, through the command."""

import csv

import numpy as np
import pytest

from structmap.cli import main
from structmap.experiment import Experiment
from structmap.one_process.dispersion import motion_kernel

FIELDS = np.array([12, 15, 18, 21, 24, 44, 47, 52.0])
PLACES = ((60.0, 600.0, 2.0), (100.0, 850.0, 6.0))
HEADER = "residue,mas_rate [kHz],proton_frequency [MHz],x = field [kHz],R1rho,error\n"


def rows(tau=8e-6, *, n_sites=6, seed=3, places=PLACES, error=0.2):
    """Return lines of a long table: one time, a baseline for each condition."""
    rng = np.random.default_rng(seed)
    lines = []
    for site in range(1, n_sites + 1):
        size = rng.uniform(0.006, 0.012)
        for rate, frequency, base in places:
            experiment = Experiment(
                mas_rate_hertz=rate * 1e3, proton_frequency_megahertz=frequency
            )
            kernel = motion_kernel(FIELDS * 1e3, tau, experiment=experiment)
            value = base + size * kernel + error * rng.standard_normal(len(FIELDS))
            lines += [
                f"{site},{rate:g},{frequency:g},{x:g},{y:.4f},{error}\n"
                for x, y in zip(FIELDS, value, strict=True)
            ]
    return lines


def judge(tmp_path, capsys, lines, *more, header=HEADER):
    """Return exit status, the rows written and what was said."""
    path, output = tmp_path / "rates.csv", tmp_path / "out.csv"
    path.write_text(header + "".join(lines))
    call = ["one-process", str(path), "--model", "mas-r1rho", "-o", str(output)]
    status = main([*call, "--sample", "deuterated", *more])
    said = capsys.readouterr()
    found = list(csv.DictReader(output.read_text().splitlines())) if status == 0 else []
    return status, found, said.err + said.out


def test_one_time_over_two_spinning_rates_and_fields(tmp_path, capsys):
    status, found, said = judge(tmp_path, capsys, rows())
    assert status == 0
    (row,) = found
    assert row["verdict"] == "shared"
    assert float(row["low"]) < 8e-6 < float(row["high"])
    assert "within 3 kHz of the spinning rate" not in row["points_left_out"]
    assert "52 kHz at 100 kHz spinning, 850 MHz: within 5 kHz of" not in said
    assert "2 spinning rates or proton frequencies are fitted together" in said


def test_the_guard_band_is_that_of_each_spinning_rate(tmp_path, capsys):
    places = ((60.0, 600.0, 2.0), (45.0, 600.0, 3.0))
    _, found, _ = judge(tmp_path, capsys, rows(places=places))
    left_out = found[0]["points_left_out"]
    assert "44 kHz at 45 kHz spinning, 600 MHz: within 3 kHz of" in left_out
    assert "44 kHz at 60 kHz" not in left_out


def test_a_baseline_for_each_condition_is_needed(tmp_path, capsys):
    """Without the columns of conditions the two baselines would be called misfit."""
    together, _, _ = judge(tmp_path, capsys, rows(error=0.05))
    assert together == 0
    alone = [line for line in rows(error=0.05) if ",60,600," in line]
    status, found, _ = judge(tmp_path, capsys, alone)
    assert status == 0
    assert found[0]["verdict"] == "shared"
    assert float(found[0]["low"]) < 8e-6 < float(found[0]["high"])


def test_the_joint_interval_is_that_of_a_fit_of_all_parameters(tmp_path, capsys):
    """Two baselines and one amplitude a site, by plain least squares."""
    lines = rows(error=0.2)
    _, found, _ = judge(tmp_path, capsys, lines)
    cells = np.array([[float(c) for c in line.split(",")] for line in lines])
    tau = np.geomspace(6e-6, 1.1e-5, 601)
    chi2 = np.zeros(len(tau))
    kept = ~((cells[:, 1] == 60) & (np.abs(cells[:, 3] - 60) <= 3))
    kept &= cells[:, 3] * 1e3 >= 2000
    for site in np.unique(cells[:, 0]):
        part = cells[kept & (cells[:, 0] == site)]
        for number, time in enumerate(tau):
            design = np.zeros((len(part), 3))
            for block, (rate, frequency, _) in enumerate(PLACES):
                inside = part[:, 1] == rate
                design[inside, block] = 1
                experiment = Experiment(
                    mas_rate_hertz=rate * 1e3, proton_frequency_megahertz=frequency
                )
                design[inside, 2] = motion_kernel(
                    part[inside, 3] * 1e3, time, experiment=experiment
                )
            rest = np.linalg.lstsq(design, part[:, 4], rcond=None)[1]
            chi2[number] += rest[0] / 0.2**2
    assert float(found[0]["value"]) == pytest.approx(tau[chi2.argmin()], rel=1e-3)


@pytest.mark.parametrize(
    ("header", "message"),
    [
        (
            HEADER.replace("[kHz],proton", ",proton"),
            "mas_rate has no unit; write it in brackets",
        ),
        (
            HEADER.replace("mas_rate [kHz]", "mas_rate [ms]"),
            "has the unit 'ms'; write it in brackets",
        ),
    ],
)
def test_conditions_without_a_unit_are_refused(tmp_path, capsys, header, message):
    status, _, said = judge(tmp_path, capsys, rows(), header=header)
    assert status == 1
    assert message in " ".join(said.replace("'mas_rate'", "mas_rate").split())


def test_a_spinning_rate_of_zero_is_refused(tmp_path, capsys):
    lines = rows()
    lines[3] = lines[3].replace(",60,", ",0,", 1)
    status, _, said = judge(tmp_path, capsys, lines)
    assert status == 1
    assert "row 5: mas_rate [kHz] is '0'; write a number above 0" in said


def test_other_models_take_one_condition(tmp_path, capsys):
    status, _, said = judge(tmp_path, capsys, rows(), "--model", "exchange-r1rho")
    assert status == 1
    assert "R1rho stands at 2 conditions and exchange-r1rho takes one" in said
    name = "R1rho_60kHzMAS_600MHz"
    more = ("--model", "exchange-r1rho", "--process-quantity", name)
    status, found, _ = judge(tmp_path, capsys, rows(n_sites=3), *more)
    assert status == 0
    assert found[0]["model"] == "exchange-r1rho"


def test_sites_with_few_points_and_other_profiles_are_told(tmp_path, capsys):
    time = np.array([0.5, 1, 2, 3, 4, 6])
    lines = [
        f"{site},{x},{site + 2 * np.exp(-0.4 * x):.4f},0.02,{x},0.1\n"
        for site in range(1, 6)
        for x in time
        if site < 5 or x < 2.5
    ]
    head = "residue,x = time [s],I,I_error,J,J_error\n"
    more = ("--model", "exponential")
    status, _, said = judge(tmp_path, capsys, lines, *more, header=head)
    assert status == 0
    assert "1 site has too few points and is left out: 5." in said
    assert "I is fitted; the other profiles (J) are not" in said
    *_, said = judge(
        tmp_path, capsys, lines, *more, "--process-quantity", "I", header=head
    )
    assert "is fitted; the other" not in said
