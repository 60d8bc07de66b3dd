"""Rates of right and wrong verdicts over simulated groups, with binomial bounds.

Bounds are those that a rate as published would leave in less than one case in a
thousand; the large run is the benchmark.
"""

import numpy as np
import pytest
from scipy.stats import binom

from structmap.one_process import fit_group
from tests.one_process.simulated import ONE_RATE, Case, run_case, split

GROUPS = 40
RARE = 1e-3


def most(share):
    return binom.ppf(1 - RARE, GROUPS, share) / GROUPS


def least(share):
    return binom.ppf(RARE, GROUPS, share) / GROUPS


def run(case):
    return run_case(case, n_groups=GROUPS, n_replicates=99, seed=11)


@pytest.mark.parametrize("stated", [1.0, 0.5, 2.0])
def test_one_rate_is_seldom_called_distinct_whatever_the_stated_errors(stated):
    case = Case("one", kinetics=True, values=(0.7,) * 8, stated=stated)
    found = run(case)
    assert found.verdicts.get("distinct", 0) <= most(0.04)
    assert found.covered >= least(0.95)


def test_two_rates_with_ratio_two_are_seldom_called_shared():
    found = run(Case("two", kinetics=True, values=split(0.7, 2.0)))
    assert found.parametric >= least(0.97)
    assert found.verdicts.get("shared", 0) <= most(0.03)


def test_one_odd_site_leaves_a_subset():
    # Small errors, so that the window of the seven others is never the obstacle.
    values = split(0.7, 3.0, odd=1)
    found = run(Case("odd", kinetics=True, values=values, noise=0.02))
    assert found.verdicts.get("shared by a subset", 0) >= least(0.9)


def test_motion_outside_the_window_is_never_called_shared():
    found = run(Case("outside", kinetics=False, values=(3e-7,) * 8))
    assert found.verdicts.get("shared", 0) == 0


def test_intervals_cover_the_truth_in_nineteen_of_twenty_groups():
    rng = np.random.default_rng(5)
    n_groups, inside = 150, 0
    for _ in range(n_groups):
        data = ONE_RATE.draw(rng)
        fit = fit_group(data.x, data.value, data.error, ONE_RATE.model)
        inside += fit.low < ONE_RATE.truth < fit.high
    low, high = binom.ppf([RARE, 1 - RARE], n_groups, 0.95) / n_groups
    assert low <= inside / n_groups <= high
