"""Slow modes and groups that move together."""

import numpy as np
import pytest
from scipy.sparse import csr_array

from structmap.contacts import choose_assemblies
from structmap.network import (
    build_network,
    find_slow_modes,
    judge_moving_together,
    laplacian_of,
)
from structmap.network.modes import random_groups
from tests.network.test_inversion import laplacian
from tests.quotient.cases import archive


def two_lobes():
    """Two cubes of 5 x 5 x 5 nodes, joined at one corner."""
    grid = np.stack(np.meshgrid(*[range(5)] * 3, indexing="ij"), -1).reshape(-1, 3)
    near = np.linalg.norm(grid[:, None] - grid[None], axis=2) < 1.5
    pairs = np.argwhere(np.triu(near, 1)).tolist()
    both = pairs + [[a + 125, b + 125] for a, b in pairs] + [[124, 125]]
    return csr_array(laplacian(both, 250))


def test_slow_modes_agree_with_dense_algebra(data_folder):
    structure = archive(data_folder, "6wg6.cif.gz")
    network = build_network(structure, choose_assemblies(structure, "auto"))
    sparse = laplacian_of(network, "crystal")
    n_nodes = 700
    block = sparse[:n_nodes][:, :n_nodes]
    block = csr_array(block - np.diag(np.asarray(block.sum(axis=1)).ravel()))
    found = find_slow_modes(block, n_modes=10)
    values = np.linalg.eigvalsh(block.toarray())
    n_still = int((values < 1e-9).sum())
    np.testing.assert_allclose(
        found.eigenvalue, values[n_still : n_still + 10], atol=1e-8
    )
    residual = block @ found.vector - found.vector * found.eigenvalue
    np.testing.assert_allclose(residual, 0, atol=1e-8)


def test_chain_has_the_known_modes():
    """Eigenvalues of an open chain of n beads: 4 sin^2(pi k / 2 n)."""
    springs = [(i, i + 1) for i in range(599)]
    found = find_slow_modes(csr_array(laplacian(springs, 600)), n_modes=5)
    expected = 4 * np.sin(np.pi * np.arange(1, 6) / 1200) ** 2
    np.testing.assert_allclose(found.eigenvalue, expected, rtol=1e-6)


def test_parts_that_are_not_tied_add_no_false_modes():
    springs = [(0, 1), (1, 2), (3, 4), (4, 5)]
    found = find_slow_modes(csr_array(laplacian(springs, 6)))
    np.testing.assert_allclose(found.eigenvalue, [1, 1, 3, 3], atol=1e-12)


def test_one_lobe_moves_together_and_a_group_across_does_not():
    net = two_lobes()
    modes = find_slow_modes(net, n_modes=3)
    rng = np.random.default_rng(0)
    lobe = np.arange(20, 60)
    across = np.concatenate([np.arange(100, 125), np.arange(125, 150)])
    inside = judge_moving_together(lobe, net, modes=modes, rng=rng, n_groups=60)
    split = judge_moving_together(across, net, modes=modes, rng=rng, n_groups=60)
    assert inside.correlation > split.correlation
    assert split.p_value > 0.5
    assert inside.correlation > 0


def test_random_groups_are_connected_and_as_compact(data_folder):
    structure = archive(data_folder, "4zhl.cif.gz")
    network = build_network(structure, choose_assemblies(structure, "auto"))
    net = laplacian_of(network, "crystal")
    nodes = np.arange(40, 58)
    touches = net.toarray() < 0
    springs = touches[nodes][:, nodes].sum() / 2
    rng = np.random.default_rng(2)
    groups = random_groups(nodes, net, rng=rng, n_groups=50)
    assert len(groups) == 50
    for group in groups:
        assert len(set(group.tolist())) == len(nodes)
        own = touches[group][:, group]
        assert abs(own.sum() / 2 - springs) <= max(1, 0.1 * springs)
        walk = np.linalg.matrix_power(own.astype(float) + np.eye(len(group)), 20)
        assert (walk > 0).all()


def test_random_groups_are_no_rarer_than_chance_says(data_folder):
    """p of random groups must be spread evenly: mean 0.5, 40 groups, 4 sigma."""
    structure = archive(data_folder, "1gbt.cif.gz")
    network = build_network(structure, choose_assemblies(structure, "auto"))
    net = laplacian_of(network, "crystal")
    modes = find_slow_modes(net, n_modes=10)
    rng = np.random.default_rng(8)
    start = np.arange(100, 115)
    planted = random_groups(start, net, rng=rng, n_groups=40)
    p = [
        judge_moving_together(group, net, modes=modes, rng=rng, n_groups=39).p_value
        for group in planted
    ]
    assert np.nanmean(p) == pytest.approx(0.5, abs=4 * np.sqrt(1 / 12 / 40))


def test_same_seed_gives_the_same_answer():
    net = two_lobes()
    modes = find_slow_modes(net, n_modes=3)
    nodes = np.arange(10, 30)
    one, other = (
        judge_moving_together(
            nodes, net, modes=modes, rng=np.random.default_rng(7), n_groups=30
        )
        for _ in range(2)
    )
    assert one == other


def test_lone_node_is_refused():
    net = two_lobes()
    modes = find_slow_modes(net, n_modes=3)
    with pytest.raises(ValueError, match="two or more"):
        judge_moving_together(
            np.array([4, 4]), net, modes=modes, rng=np.random.default_rng(0)
        )
