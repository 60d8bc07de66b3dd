"""One rate for the whole molecule, or a few, and which site follows which."""

import numpy as np
import pytest

from structmap.one_process import (
    TestOptions,
    find_mixture,
    judge_group,
    make_profiles,
)
from structmap.one_process.kinetics import exponential_model

TIMES = np.geomspace(0.1, 6, 12)


def decays(rates, seed, *, noise=0.03):
    rng = np.random.default_rng(seed)
    size = rng.uniform(0.7, 1.3, len(rates))[:, None]
    true = 0.2 + size * np.exp(-np.array(rates)[:, None] * TIMES)
    return make_profiles(TIMES, true + noise * rng.standard_normal(true.shape), noise)


@pytest.mark.parametrize("seed", range(4))
def test_one_cooperative_unit_is_found_as_one(seed):
    found = find_mixture(
        decays([0.7] * 20, seed), exponential_model(), rng=np.random.default_rng(seed)
    )
    assert len(found.values) == 1
    assert found.values[0] == pytest.approx(0.7, rel=0.1)


@pytest.mark.parametrize("seed", range(4))
def test_two_groups_with_different_rates_are_told_apart(seed):
    found = find_mixture(
        decays([0.4] * 12 + [2.0] * 8, seed),
        exponential_model(),
        rng=np.random.default_rng(seed),
    )
    np.testing.assert_allclose(found.values, [0.4, 2.0], rtol=0.15)
    assert (found.member == [0] * 12 + [1] * 8).all()
    assert found.probability.min() > 0.9


def test_two_groups_are_no_one_process():
    found = judge_group(
        decays([0.4] * 6 + [2.0] * 6, 1),
        exponential_model(),
        rng=np.random.default_rng(1),
        options=TestOptions(n_replicates=199, n_border=199),
    )
    assert found.verdict == "distinct"


def test_a_molecule_without_sites_is_refused():
    empty = decays([0.5], 1).take(np.array([False]))
    with pytest.raises(ValueError, match=r"^profiles holds no site"):
        find_mixture(empty, exponential_model(), rng=np.random.default_rng(1))
