"""Relaxation in solution: tumbling time, order parameter, internal motion."""

import csv

import numpy as np
import pytest

from structmap.one_process import judge_group, plain_words
from structmap.one_process.constants import (
    NITROGEN_GYROMAGNETIC,
    PROTON_GYROMAGNETIC,
    Couplings,
)
from structmap.one_process.engine import fit_group
from structmap.one_process.model_free import (
    MOBILE_NOE,
    fit_model_free,
    solution_rates,
    tumbling_model,
)

NANO = 1e-9


def test_rates_of_a_rigid_amide_at_ten_nanoseconds():
    rates = solution_rates(10 * NANO, proton_frequency_megahertz=600.0)
    # The figures used 2.7116e7 rad/s/T for 15N, hence 1e-3 and not 1e-6.
    assert rates.r1 == pytest.approx(1.3489, rel=1e-3)
    assert rates.r2 == pytest.approx(14.4013, rel=1e-3)


def test_noe_of_fast_tumbling_has_the_textbook_limit():
    # 1 + gamma_H / (2 gamma_N) in extreme narrowing, without shift anisotropy.
    bare = Couplings(shift_anisotropy_ppm=0.0)
    rates = solution_rates(1e-14, proton_frequency_megahertz=600.0, couplings=bare)
    limit = 1 + PROTON_GYROMAGNETIC / (2 * NITROGEN_GYROMAGNETIC)
    assert rates.noe == pytest.approx(limit, rel=1e-4)


def test_order_parameter_and_internal_time_come_back():
    rates = solution_rates(
        8 * NANO,
        proton_frequency_megahertz=500.0,
        order_parameter=0.8,
        internal_second=40e-12,
    )
    fit = fit_model_free(
        [rates.r1, rates.r2, rates.noe],
        [0.02, 0.1, 0.02],
        tumbling_second=8 * NANO,
        proton_frequency_megahertz=500.0,
    )
    assert fit.order_parameter == pytest.approx(0.8, rel=1e-3)
    assert fit.internal_second == pytest.approx(40e-12, rel=2e-2)
    assert fit.chi2 == pytest.approx(0.0, abs=1e-3)
    assert 0 < fit.order_error < 0.02


def test_two_fields_give_one_tumbling_time():
    observables, fields = ("R1", "R2", "R1", "R2"), (500.0, 500.0, 800.0, 800.0)
    model = tumbling_model(observables, fields)
    order = np.array([[0.85], [0.9], [0.8]])
    rates = order * model.function(np.arange(4.0), np.array([[6 * NANO]]))
    fit = fit_group(np.arange(4.0), rates, 0.01 * rates, model)
    assert fit.shared == pytest.approx(6 * NANO, rel=1e-5)
    np.testing.assert_allclose(fit.amplitude, order[:, 0], rtol=1e-5)


def test_refuses_other_observables():
    with pytest.raises(ValueError, match=r"^observables holds 'NOE'"):
        tumbling_model(("R1", "NOE"), (600.0, 600.0))


def read_t4_lysozyme(folder):
    path = folder / "public" / "t4_lysozyme" / "600Mhz-R1R2NOE.dat"
    lines = path.read_text(encoding="utf-8").splitlines()
    return np.array([[float(cell) for cell in line.split()] for line in lines])


def fit_tumbling(rows):
    kept = rows[:, 5] > MOBILE_NOE
    values, errors = rows[kept][:, [1, 3]], rows[kept][:, [2, 4]]
    model = tumbling_model(("R1", "R2"), (600.0, 600.0))
    return fit_group(np.arange(2.0), values, errors, model)


def test_t4_lysozyme_has_no_single_tumbling_time_at_the_stated_errors(data_folder):
    """Median from R2/R1 over rigid sites 10.51 ns; one isotropic time does not fit."""
    fit = fit_tumbling(read_t4_lysozyme(data_folder))
    assert np.nanmedian(fit.free) == pytest.approx(10.51 * NANO, rel=0.01)
    assert fit.shared == pytest.approx(10.51 * NANO, rel=0.05)
    # An axially symmetric tensor still leaves 21.9 (README of the data set), and one
    # time without a tensor cannot do better.
    assert fit.chi2_shared / fit.freedom_shared > 20


def test_the_verdict_on_t4_lysozyme_is_said_in_words(data_folder):
    fit = fit_tumbling(read_t4_lysozyme(data_folder))
    found = judge_group(fit.profiles, fit.model, rng=np.random.default_rng(1))
    assert found.verdict == "distinct"
    first = plain_words(found)[0]
    assert first.startswith("One value does not explain these ")
    assert "times as widely as their stated errors allow (reduced chi-square" in first


def test_trp_repressor_tumbles_with_the_known_time(data_folder):
    """Median (quartiles) from R2/R1 over rigid sites: 10.02 (9.71 to 10.60) ns."""
    path = data_folder / "public" / "trp_repressor" / "trp_repressor_600.csv"
    lines = [line for line in path.read_text().splitlines() if line[0] != "#"]
    names = ("residue", "R1", "R1_err", "R2", "R2_err", "NOE")
    rows = [[float(row[n]) for n in names] for row in csv.DictReader(lines)]
    fit = fit_tumbling(np.array(rows))
    assert np.nanmedian(fit.free) == pytest.approx(10.02 * NANO, rel=0.01)
    assert 9.71 * NANO < fit.shared < 10.60 * NANO
