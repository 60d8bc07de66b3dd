"""Shared fits against worked figures, certified sets and a general optimiser."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import least_squares, nnls

from structmap.one_process import Model, Parameter, fit_group, make_profiles
from structmap.one_process.cpmg import cpmg_model
from structmap.one_process.exchange import exchange_r1rho_model
from structmap.one_process.kinetics import exponential_model
from structmap.one_process.model_free import tumbling_model
from structmap.one_process.titration import binding_model, melting_model
from tests.one_process.demo import FIELDS, MODEL

CERTIFIED = Path(__file__).parent.parent / "data" / "reference" / "nist"
TIMES = np.array([0.5, 1, 2, 3, 4, 6])
DECAYS = np.array(
    [
        [0.82, 0.71, 0.49, 0.37, 0.27, 0.17],
        [0.55, 0.49, 0.36, 0.26, 0.20, 0.13],
        [1.05, 0.88, 0.67, 0.49, 0.38, 0.22],
    ]
)
ERRORS = np.array([[0.02], [0.015], [0.03]])


# --- a worked example -----------------------------------------------------------------


def test_three_decays_as_a_fit_of_all_seven_parameters_gives_them():
    fit = fit_group(TIMES, DECAYS, ERRORS, exponential_model())
    assert fit.shared == pytest.approx(0.3507804, rel=1e-6)
    assert fit.chi2_shared == pytest.approx(3.258476, rel=1e-6)
    np.testing.assert_allclose(fit.free, [0.3821748, 0.3335162, 0.3248340], rtol=1e-6)
    assert fit.chi2_free == pytest.approx(2.624766, rel=1e-6)
    assert fit.f_statistic == pytest.approx(1.086457, rel=1e-6)
    stated = (fit.low_stated, fit.high_stated)
    assert stated == pytest.approx((0.2885700, 0.4168513), rel=1e-6)
    assert (fit.low, fit.high) == pytest.approx((0.3123608, 0.3906386), rel=1e-6)
    assert (fit.freedom_between, fit.freedom_free, fit.freedom_shared) == (2, 9, 11)


def test_leverages_sum_to_the_linear_parameters_and_residuals_add_up():
    fit = fit_group(TIMES, DECAYS, ERRORS, exponential_model())
    np.testing.assert_allclose(fit.leverage.sum(axis=1), 2.0, rtol=1e-9)
    misfit = ((fit.residual / ERRORS) ** 2).sum()
    assert misfit == pytest.approx(fit.chi2_shared, rel=1e-9)


def test_bands_are_those_of_the_full_covariance():
    """Delta method on a general fit of all seven parameters (errors scaled)."""
    fit = fit_group(TIMES, DECAYS, ERRORS, exponential_model())

    def curves(parameters, x):
        rate, levels, sizes = parameters[0], parameters[1:4], parameters[4:]
        return levels[:, None] + sizes[:, None] * np.exp(-rate * x)

    best = np.array([fit.shared, *fit.baseline, *fit.amplitude])
    steps = np.eye(7) * 1e-6

    def slopes(x):
        ends = [curves(best + s, x) - curves(best - s, x) for s in steps]
        return np.stack(ends, axis=-1) / 2e-6

    design = (slopes(TIMES) / ERRORS[..., None]).reshape(-1, 7)
    covariance = np.linalg.inv(design.T @ design) * fit.chi2_shared / 11
    fine = slopes(fit.curve_x)
    expected = np.sqrt(np.einsum("sxi,ij,sxj->sx", fine, covariance, fine))
    np.testing.assert_allclose(fit.curve_error, expected, rtol=0.02)


def test_band_of_the_page_covers_95_percent_by_students_t():
    """t(0.975) with 11 degrees of freedom is 2.2010 (tables of Student's t)."""
    fit = fit_group(TIMES, DECAYS, ERRORS, exponential_model())
    np.testing.assert_allclose(fit.band, 2.2010 * fit.curve_error, rtol=1e-4)


def test_misfit_over_the_grid_crosses_its_limit_at_the_ends_of_the_interval():
    fit = fit_group(TIMES, DECAYS, ERRORS, exponential_model())
    np.testing.assert_allclose(fit.grid_shared, fit.grid_chi2.sum(axis=0))
    inside = fit.grid_shared <= fit.interval_limit
    np.testing.assert_array_equal(inside, (fit.grid > fit.low) & (fit.grid < fit.high))
    for end in (fit.low, fit.high):
        one = fit_group(TIMES, DECAYS, ERRORS, pinned(end))
        assert one.chi2_shared == pytest.approx(fit.interval_limit, rel=1e-6)


def pinned(rate):
    """The model whose rate can hardly move."""
    bounds = lambda _: (rate * (1 - 1e-9), rate * (1 + 1e-9))  # noqa: E731
    narrow = Parameter(name="k", unit="s-1", bounds=bounds)
    return replace(exponential_model(), shared=narrow)


def test_one_companion_for_all_costs_more_than_one_each():
    """The shared misfit of different populations lies above the sum of theirs."""
    model = Model(
        name="two",
        describes="decay to a common share",
        function=lambda x, rate, share: share + (1 - share) * np.exp(-rate * x),
        shared=Parameter(name="k", unit="s-1", bounds=lambda _: (0.05, 3.0)),
        companion=Parameter(
            name="s", unit="", bounds=lambda _: (0.01, 0.9), scale="linear", nodes=9
        ),
        baseline="none",
    )
    shares = np.array([[0.1], [0.5]])
    values = shares + (1 - shares) * np.exp(-0.4 * TIMES)
    fit = fit_group(TIMES, values, np.full_like(values, 0.02), model)
    at = np.abs(np.log(fit.grid / 0.4)).argmin()
    assert fit.grid_chi2[:, at].sum() < 1
    assert fit.grid_shared[at] > 100
    assert fit.grid_shared.min() == pytest.approx(fit.chi2_shared, rel=0.1)


# --- certified values -----------------------------------------------------------------


def plain(name, function, bounds, *, local=None):
    return Model(
        name=name,
        describes="certified set",
        function=function,
        shared=Parameter(name="b", unit="", bounds=lambda _: bounds),
        local=local,
        baseline="none",
    )


def local(low, high):
    return Parameter(name="c", unit="", bounds=lambda _: (low, high), nodes=20)


SETS = {
    "Misra1a": (plain("a", lambda x, b: 1 - np.exp(-b * x), (1e-5, 1e-2)), 1, 0),
    "BoxBOD": (plain("d", lambda x, b: 1 - np.exp(-b * x), (1e-2, 10)), 1, 0),
    "Misra1b": (plain("b", lambda x, b: 1 - (1 + b * x / 2) ** -2, (1e-5, 1e-2)), 1, 0),
    "Misra1c": (
        plain("c", lambda x, b: 1 - (1 + 2 * b * x) ** -0.5, (1e-5, 1e-2)),
        1,
        0,
    ),
    "Misra1d": (plain("e", lambda x, b: b * x / (1 + b * x), (1e-5, 1e-2)), 1, 0),
    "DanWood": (plain("f", lambda x, b: x**b, (0.5, 20)), 1, 0),
    "Chwirut2": (
        plain(
            "g",
            lambda x, b, c: np.exp(-b * x) / (1 + c * x),
            (1e-3, 10),
            local=local(1e-2, 100),
        ),
        0,
        None,
    ),
    "Rat42": (
        plain(
            "h",
            lambda x, b, c: 1 / (1 + c * np.exp(-b * x)),
            (1e-3, 1),
            local=local(1, 1e3),
        ),
        2,
        0,
    ),
    "Eckerle4": (
        plain(
            "i",
            lambda x, b, c: np.exp(-0.5 * ((x - b) / c) ** 2),
            (400, 500),
            local=local(0.5, 50),
        ),
        2,
        None,
    ),
}


def read_certified(name):
    """Return x, y, certified parameters and residual sum of squares."""
    lines = (CERTIFIED / f"{name}.dat").read_text(encoding="utf-8").splitlines()
    parameters = [float(s.split()[4]) for s in lines[:60] if s.strip().startswith("b")]
    squares = next(s for s in lines if s.startswith("Residual Sum of Squares"))
    data = np.array([[float(c) for c in s.split()] for s in lines[60:] if s.strip()])
    return data[:, 1], data[:, 0], parameters, float(squares.split(":")[1])


@pytest.mark.parametrize("name", SETS)
def test_certified_values(name):
    """NIST Statistical Reference Datasets, nonlinear regression."""
    model, shared, amplitude = SETS[name]
    x, y, parameters, squares = read_certified(name)
    fit = fit_group(x, y, 1.0, model)
    assert fit.shared == pytest.approx(parameters[shared], rel=1e-6)
    assert fit.chi2_shared == pytest.approx(squares, rel=1e-6)
    if amplitude is not None:
        assert fit.amplitude[0] == pytest.approx(parameters[amplitude], rel=1e-6)


def test_two_copies_of_a_certified_set_share_its_value():
    x, y, parameters, squares = read_certified("Misra1a")
    fit = fit_group(x, np.stack([y, y]), 1.0, SETS["Misra1a"][0])
    assert fit.shared == pytest.approx(parameters[1], rel=1e-6)
    assert fit.chi2_shared == pytest.approx(2 * squares, rel=1e-6)


# --- against a general optimiser ------------------------------------------------------


TUMBLING = tumbling_model(("R1", "R2", "R1", "R2"), (500.0, 500.0, 800.0, 800.0))
PROBLEMS = {
    "mas-r1rho": (MODEL, FIELDS, (4e-6, 2e-5)),
    "exponential": (exponential_model(), np.linspace(0.1, 6, 12), (0.4, 1.2)),
    "binding": (binding_model(1e-4), np.linspace(5e-6, 4e-4, 12), (2e-5, 1e-4)),
    "model-free": (TUMBLING, np.arange(4.0), (4e-9, 1.2e-8)),
    "melting": (melting_model(), np.linspace(290, 350, 15), (310.0, 330.0)),
    "cpmg": (cpmg_model(), np.geomspace(50, 1000, 12), (500.0, 3000.0)),
    "exchange-r1rho": (
        exchange_r1rho_model(),
        np.geomspace(100, 3000, 12),
        (800, 4000),
    ),
}


def draw_problem(name, rng, *, n_sites=3):
    """Return model, x, values, errors: three sites with one value and small errors."""
    model, x, (low, high) = PROBLEMS[name]
    arguments = [rng.uniform(low, high)]
    if model.companion:
        arguments.append(rng.uniform(0.7, 0.95))
    local_range = {"melting": (2e5, 4e5)}.get(name, (400.0, 2000.0))
    kernel = np.stack(
        [
            model.function(
                x,
                *(
                    np.array([a])
                    for a in arguments + extra_parameters(model, rng, local_range)
                ),
            )
            for _ in range(n_sites)
        ]
    ).reshape(n_sites, len(x))
    size = np.ones(n_sites)
    if model.amplitude != "unit":
        scale = {"mas-r1rho": 0.01}.get(name, 1.0)
        size = scale * rng.uniform(0.5, 1.0, n_sites)
    base = 0.0 if model.baseline == "none" else rng.uniform(2, 4, n_sites)[:, None]
    true = base + size[:, None] * kernel
    error = 0.01 * np.abs(true).max(axis=1, keepdims=True) * np.ones_like(true)
    return model, x, true + error * rng.standard_normal(true.shape), error


def extra_parameters(model, rng, local_range):
    return [rng.uniform(*local_range)] if model.local else []


def refit_everything(fit):
    """Refit all parameters at once by a general least-squares library."""
    model, data = fit.model, fit.profiles
    n_sites = len(data.name)

    def unpack(vector):
        parts = iter(np.split(vector, len(vector)))
        shared = [np.exp(next(parts))[:, None] * fit.best]
        if model.companion:
            shared.append(next(parts)[:, None] * fit.companion)
        take = lambda: np.concatenate([next(parts) for _ in range(n_sites)])  # noqa: E731
        locals_ = take() * fit.local if model.local else None
        size = take() * fit.amplitude if model.amplitude != "unit" else np.ones(n_sites)
        base = take() * fit.baseline if model.baseline != "none" else np.zeros(n_sites)
        return shared, locals_, size, base

    def residuals(vector):
        shared, locals_, size, base = unpack(vector)
        own = [] if locals_ is None else [locals_[:, None]]
        kernel = model.function(data.x, *shared, *own)
        return (
            (base[:, None] + size[:, None] * kernel - data.value) / data.error
        ).ravel()

    n_own = model.n_own * n_sites
    start = np.concatenate([[0.01], np.ones(model.n_shared - 1 + n_own) * 1.01])
    found = least_squares(
        residuals, start, xtol=1e-15, ftol=1e-15, gtol=1e-15, method="lm"
    )
    return float(np.exp(found.x[0]) * fit.best), 2 * found.cost


def compare(name, seed):
    rng = np.random.default_rng(seed)
    fit = fit_group(*draw_problem(name, rng)[1:], PROBLEMS[name][0])
    value, chi2 = refit_everything(fit)
    assert fit.chi2_shared == pytest.approx(chi2, rel=1e-8)
    assert fit.best == pytest.approx(value, rel=1e-6)


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("name", PROBLEMS)
def test_a_general_library_agrees_on_random_problems(name, seed):
    compare(name, seed)


def test_a_flat_valley_of_populations_is_followed_to_its_end():
    rng = np.random.default_rng(6)
    _, *problem = draw_problem("exchange-r1rho", rng, n_sites=2)
    fit = fit_group(*problem, exchange_r1rho_model())
    value, chi2 = refit_everything(fit)
    assert fit.chi2_shared == pytest.approx(chi2, rel=1e-9)
    # So flat that at this chi-square the rate is known to five digits.
    assert fit.best == pytest.approx(value, rel=1e-5)


# --- limits, signs, robustness --------------------------------------------------------


def test_an_interval_that_the_data_do_not_close_is_open():
    slow = np.exp(-0.001 * TIMES)[None] + np.array([[0.01, -0.01, 0, 0.01, -0.01, 0]])
    fit = fit_group(TIMES, slow, 0.01, exponential_model())
    assert np.isnan(fit.low)


def test_a_minimum_on_an_end_is_no_value():
    rising = 1e-4 * np.array([[5.0, 4, 3, 3, 2, 1]])  # steeper than any time allowed
    model = Model(
        name="narrow",
        describes="too narrow a range",
        function=lambda x, k: np.exp(-k * x),
        shared=Parameter(name="k", unit="s-1", bounds=lambda _: (5.0, 50.0)),
    )
    fit = fit_group(TIMES, rising, 1e-5, model)
    assert np.isnan(fit.shared)
    assert fit.best == pytest.approx(5.0)


def test_amplitudes_and_baselines_stay_where_physics_allows():
    falling = np.stack([5 - 0.05 * FIELDS / 1e3, 0.02 * FIELDS / 1e3 + 0.1])
    fit = fit_group(FIELDS, falling, 0.1, MODEL)
    assert (fit.amplitude >= 0).all()
    assert (fit.baseline >= 0).all()
    assert fit.amplitude[0] == 0.0


def test_nonnegative_solution_is_that_of_a_constrained_optimiser():
    rng = np.random.default_rng(5)
    kernel = MODEL.function(FIELDS, np.array([[1e-5]]))[0]
    for _ in range(50):
        value = rng.normal(0, 1, len(FIELDS)) + rng.uniform(-3, 3) * kernel / 2000
        fixed = Model(
            name="fixed",
            describes="one node that matters",
            function=MODEL.function,
            shared=Parameter(name="b", unit="", bounds=lambda _: (1e-5, 1.0000001e-5)),
            amplitude="nonnegative",
            baseline="nonnegative",
        )
        fit = fit_group(FIELDS, value[None], 1.0, fixed)
        design = np.stack([np.ones(len(FIELDS)), kernel], axis=1)
        (base, size), norm = nnls(design, value)
        if base == 0 and size == 0:
            continue
        assert fit.chi2_shared == pytest.approx(norm**2, rel=1e-5)


def test_robust_fit_is_not_drawn_by_a_wild_point():
    value = DECAYS.copy()
    value[1, 3] += 0.5
    plainly = fit_group(TIMES, value, ERRORS, exponential_model())
    robustly = fit_group(TIMES, value, ERRORS, exponential_model(), robust=True)
    truth = 0.3507804
    assert abs(robustly.shared - truth) < 0.5 * abs(plainly.shared - truth)


def test_a_user_adds_a_model_in_ten_lines():
    stretched = Model(
        name="stretched",
        describes="stretched exponential decay with exponent 0.5",
        function=lambda x, rate: np.exp(-np.sqrt(rate * x)),
        shared=Parameter(
            name="k", unit="s-1", bounds=lambda x: (0.01 / x.max(), 100 / x.max())
        ),
        x_unit="s",
    )
    true = np.array([[2.0], [3.0]]) * np.exp(-np.sqrt(0.7 * TIMES)) + 1.0
    fit = fit_group(TIMES, true, 0.01, stretched)
    assert fit.shared == pytest.approx(0.7, rel=1e-5)


@settings(max_examples=20)
@given(scale=st.floats(0.01, 100), shift=st.floats(-5, 5))
def test_level_and_size_of_the_values_do_not_move_the_rate(scale, shift):
    fit = fit_group(TIMES, scale * DECAYS + shift, scale * ERRORS, exponential_model())
    assert fit.shared == pytest.approx(0.3507804, rel=1e-5)


@settings(max_examples=20)
@given(stretch=st.floats(0.01, 100))
def test_the_rate_follows_the_unit_of_time(stretch):
    fit = fit_group(TIMES * stretch, DECAYS, ERRORS, exponential_model())
    assert fit.shared * stretch == pytest.approx(0.3507804, rel=1e-5)


@pytest.mark.parametrize(
    ("x", "error", "message"),
    [
        (TIMES, 0.0, r"^error holds 0\.0; it must be above 0"),
        (TIMES, -1.0, r"^error holds -1\.0; it must be above 0"),
        ([0, 1, 2, 3, 4, np.nan], 1.0, r"^x holds a value that is not finite"),
        (TIMES[:5], 1.0, r"^value has shape \(3, 6\); it must have \(3, 5\)"),
    ],
)
def test_refuses_what_cannot_be_fitted(x, error, message):
    with pytest.raises(ValueError, match=message):
        make_profiles(x, DECAYS, error)


def test_a_function_of_the_wrong_shape_is_refused():
    wrong = Model(
        name="wrong",
        describes="forgets x",
        function=lambda x, b: b[..., 0],
        shared=Parameter(name="b", unit="", bounds=lambda _: (1.0, 2.0)),
    )
    with pytest.raises(ValueError, match=r"^function of wrong gives \(13,\), not "):
        fit_group(TIMES, DECAYS, ERRORS, wrong)
