"""The exact diagonal of the pseudo-inverse."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.sparse import csc_array, csr_array

from structmap.network import fluctuations_of, selected_inverse_diagonal
from structmap.network.inversion import _closed_pattern, _parents, factorise


def laplacian(springs, n_nodes):
    dense = np.zeros((n_nodes, n_nodes))
    for one, other in springs:
        if one != other:
            dense[one, other] -= 1
            dense[other, one] -= 1
    return dense - np.diag(dense.sum(axis=0))


def pseudo_inverse_diagonal(dense):
    """By dense eigenvectors."""
    value, vector = np.linalg.eigh(dense)
    kept = value > 1e-9
    return (vector[:, kept] ** 2 / value[kept]).sum(axis=1)


@given(st.integers(1, 14), st.data())
def test_agrees_with_dense_algebra_on_any_graph(n_nodes, data):
    node = st.integers(0, n_nodes - 1)
    springs = data.draw(st.lists(st.tuples(node, node), max_size=40))
    dense = laplacian(springs, n_nodes)
    found = fluctuations_of(csr_array(dense))
    np.testing.assert_allclose(found, pseudo_inverse_diagonal(dense), atol=1e-10)


@pytest.mark.parametrize("n_nodes", [2, 3, 50])
def test_open_chain_has_the_known_fluctuations(n_nodes):
    """A chain of beads: resistances add, f_i = sum_j |i-j|/n - sum_jk |j-k|/(2 n^2).

    The pseudo-inverse of a tree's Laplacian by its path lengths (Klein and Randic,
    J. Math. Chem. 12, 81 (1993); cited from memory).
    """
    springs = [(i, i + 1) for i in range(n_nodes - 1)]
    gaps = np.abs(np.subtract.outer(np.arange(n_nodes), np.arange(n_nodes)))
    expected = gaps.mean(axis=1) - gaps.mean() / 2
    found = fluctuations_of(csr_array(laplacian(springs, n_nodes)))
    np.testing.assert_allclose(found, expected, rtol=1e-10)


def test_large_random_net_agrees_with_dense_algebra():
    rng = np.random.default_rng(5)
    places = rng.uniform(0, 22, size=(700, 3))
    near = np.linalg.norm(places[:, None] - places[None], axis=2) < 3.6
    springs = np.argwhere(np.triu(near, 1))
    dense = laplacian(springs.tolist(), 700)
    found = fluctuations_of(csr_array(dense))
    np.testing.assert_allclose(found, pseudo_inverse_diagonal(dense), atol=1e-8)


def test_inverse_of_a_general_positive_definite_matrix():
    rng = np.random.default_rng(1)
    half = np.where(rng.random((80, 80)) < 0.05, rng.normal(size=(80, 80)), 0)
    dense = half @ half.T + np.eye(80)
    found = selected_inverse_diagonal(factorise(csc_array(dense)))
    np.testing.assert_allclose(found, np.linalg.inv(dense).diagonal(), rtol=1e-10)


def test_entry_that_cancels_to_zero_is_put_back():
    """Rows 2 and 3 hang on column 0, whose parent 1 lost its entry in row 3."""
    lower = np.eye(4)
    lower[[1, 2, 3], 0] = 0.5
    lower[2, 1] = 0.5
    lower[3, 2] = 0.5
    closed = _closed_pattern(csc_array(lower))
    column = closed.indices[closed.indptr[1] : closed.indptr[2]]
    np.testing.assert_array_equal(column, [1, 2, 3])
    np.testing.assert_array_equal(_parents(closed), [1, 2, 3, -1])
    np.testing.assert_array_equal(closed.toarray(), lower)


def test_nodes_that_nothing_holds_do_not_move_about_themselves():
    np.testing.assert_array_equal(fluctuations_of(csr_array((3, 3))), 0)
