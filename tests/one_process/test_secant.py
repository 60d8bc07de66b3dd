"""Replicates are refitted by secants: against the full iteration."""

import numpy as np
import pytest

from structmap.one_process.cpmg import cpmg_model, exact_cpmg
from structmap.one_process.damped import iterate
from structmap.one_process.engine import fitted_values, make_solver
from structmap.one_process.exchange import TwoSites, exact_r1rho, exchange_r1rho_model
from structmap.one_process.problems import Problems
from structmap.one_process.profiles import make_profiles
from structmap.one_process.search import to_axis
from structmap.one_process.secant import iterate_by_secants

MODELS = {
    "cpmg": (cpmg_model(), exact_cpmg, np.geomspace(50, 1000, 12)),
    "exchange-r1rho": (
        exchange_r1rho_model(),
        exact_r1rho,
        np.geomspace(100, 3000, 12),
    ),
}


def solved(name, *, rates=(1500.0,) * 5, seed=2):
    """Return the solver of five sites with shifts of their own and 3 % noise."""
    model, exact, x = MODELS[name]
    rng = np.random.default_rng(seed)
    shifts = rng.uniform(400, 1500, len(rates))
    true = np.array(
        [
            exact(
                x,
                TwoSites(
                    exchange_rate_per_second=rate,
                    major_population=0.93,
                    shift_difference=shift,
                    r1=1.5,
                    r2=10.0,
                ),
            )
            for rate, shift in zip(rates, shifts, strict=True)
        ]
    )
    noise = 0.03 * true * rng.standard_normal(true.shape)
    return make_solver(model, make_profiles(x, true + noise, 0.03 * true))


@pytest.mark.parametrize("name", MODELS)
def test_secants_end_where_the_full_iteration_ends(name):
    solver = solved(name)
    state = solver.state(solver.fit_shared()[0])
    fitted = fitted_values(state, state.kernel)
    noise = np.random.default_rng(3).standard_normal((40, *fitted.shape))
    values = fitted + solver.profiles.error * noise
    axes = [state.position, float(to_axis(state.companion, solver.model.companion))]
    start = Problems(
        value=values,
        root_weight=np.broadcast_to(solver.profiles.root_weight, values.shape),
        shared=np.tile(axes, (40, 1)),
        local=np.tile(to_axis(state.local, solver.model.local), (40, 1)),
        chi2=np.full(40, np.inf),
    )
    x = solver.profiles.x
    found = iterate_by_secants(solver.model, x, start, tolerance=1e-4, rounds=16).chi2
    wanted = iterate(solver.model, x, start, tolerance=1e-9).chi2
    # The statistic of five sites scatters by 0.4; this moves it by 0.004 at most.
    assert (found - wanted).max() < 0.05
    assert (found - wanted).min() > -1e-6


@pytest.mark.parametrize("name", MODELS)
def test_what_sharing_costs_is_the_difference_of_both_fits(name):
    solver = solved(name)
    state = solver.state(solver.fit_shared()[0])
    moves = np.array([[0.1, -0.1, 0.1, -0.1, 0.1], [0.4, 0, 0, 0, 0]])
    values = solver.moved(state, moves)
    growth = solver.growth(values, state)
    shared, free = solver.minima(values, state)
    np.testing.assert_allclose(growth, shared, rtol=1e-12)
    assert (free < 0.05 * shared).all()  # the sites alone fit, up to their slow search
    assert growth[1] > growth[0] > 1
