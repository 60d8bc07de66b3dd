"""The test of one process where sites have nonlinear parameters of their own."""

import numpy as np
import pytest

from structmap.one_process import TestOptions, fit_group, judge_group, make_profiles
from structmap.one_process.cpmg import cpmg_model, exact_cpmg, luz_meiboom_cpmg
from structmap.one_process.exchange import TwoSites
from structmap.one_process.kinetics import exponential_model
from structmap.one_process.model import Model, Parameter
from structmap.one_process.titration import melting_model, unfolded_fraction

FREQUENCIES = np.array([50, 100, 150, 200, 300, 400, 500, 600, 700, 800, 900, 1000.0])
SHIFTS = 2 * np.pi * np.array([50, 100, 200, 400.0])
FAST = TestOptions(n_replicates=99, n_border=99)


def dispersions(rate, noise, seed):
    rng = np.random.default_rng(seed)
    true = np.array(
        [
            exact_cpmg(
                FREQUENCIES,
                TwoSites(
                    exchange_rate_per_second=rate,
                    major_population=0.95,
                    shift_difference=shift,
                    r2=10.0,
                ),
            )
            for shift in SHIFTS
        ]
    )
    error = noise * true
    return make_profiles(
        FREQUENCIES, true + error * rng.standard_normal(true.shape), error
    )


def luz_meiboom_model():
    """Return the fast-exchange formula with one amplitude a site."""

    def function(x, rate):
        return 1 - luz_meiboom_part(x, rate)

    def luz_meiboom_part(x, rate):
        return 4 * x / rate * np.tanh(rate / (4 * x))

    return Model(
        name="fast",
        describes="fast exchange",
        function=function,
        shared=Parameter(name="k_ex", unit="s-1", bounds=lambda _: (50.0, 5e4)),
        amplitude="nonnegative",
        baseline="nonnegative",
    )


def test_the_kernel_of_the_trap_is_the_published_formula():
    sites = TwoSites(
        exchange_rate_per_second=3000.0, major_population=0.9, shift_difference=500.0
    )
    expected = luz_meiboom_cpmg(FREQUENCIES, sites)
    kernel = luz_meiboom_model().function(FREQUENCIES, 3000.0)
    np.testing.assert_allclose(0.09 * 500**2 / 3000 * kernel, expected, rtol=1e-12)


def test_fast_formula_gives_each_shift_another_rate():
    """One process at k_ex 1000: fitted alone, 1046, 1176, 1644 and 3367 s-1."""
    clean = dispersions(1000.0, 0.03, 1)
    true = np.array(
        [
            exact_cpmg(
                FREQUENCIES,
                TwoSites(
                    exchange_rate_per_second=1000.0,
                    major_population=0.95,
                    shift_difference=shift,
                    r2=10.0,
                ),
            )
            for shift in SHIFTS
        ]
    )
    fit = fit_group(FREQUENCIES, true, clean.error, luz_meiboom_model())
    np.testing.assert_allclose(fit.free, [1046, 1176, 1644, 3367], rtol=0.03)


def test_exact_exchange_model_is_not_fooled():
    found = judge_group(
        dispersions(1000.0, 0.02, 4),
        cpmg_model(),
        rng=np.random.default_rng(1),
        options=FAST,
    )
    assert found.verdict == "shared"
    assert found.low < 1000 < found.high
    assert found.fit.companion == pytest.approx(0.95, abs=0.03)


def melting(midpoints, seed):
    rng = np.random.default_rng(seed)
    temperature = np.linspace(290, 350, 15)
    enthalpy = rng.uniform(2e5, 4e5, len(midpoints))
    true = 1 + 2 * np.array(
        [
            unfolded_fraction(temperature, midpoint, own)
            for midpoint, own in zip(midpoints, enthalpy, strict=True)
        ]
    )
    return make_profiles(
        temperature, true + 0.05 * rng.standard_normal(true.shape), 0.05
    )


def test_one_midpoint_with_enthalpies_of_their_own_is_shared():
    found = judge_group(
        melting([320.0] * 5, 1),
        melting_model(),
        rng=np.random.default_rng(1),
        options=FAST,
    )
    assert found.verdict == "shared"
    assert found.low < 320 < found.high


def test_midpoints_eight_degrees_apart_are_distinct():
    found = judge_group(
        melting([316.0, 324.0, 316.0, 324.0, 316.0, 324.0], 2),
        melting_model(),
        rng=np.random.default_rng(1),
        options=FAST,
    )
    assert found.verdict == "distinct"


def test_trusted_errors_let_the_parametric_chance_decide():
    rng = np.random.default_rng(8)
    time = np.geomspace(0.1, 6, 12)
    true = np.exp(-np.repeat([0.5, 1.0], 4)[:, None] * time)
    data = make_profiles(time, true + 0.05 * rng.standard_normal(true.shape), 0.05)
    found = judge_group(
        data,
        exponential_model(),
        rng=np.random.default_rng(1),
        options=TestOptions(n_replicates=199, n_border=199, errors_trusted=True),
    )
    assert found.verdict == "distinct"
