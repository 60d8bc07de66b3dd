"""Diagonal of the pseudo-inverse of a sparse Laplacian, exactly."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csc_array, csr_array
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import SuperLU, splu

SOLVED_AT_ONCE = 256
ROWS_ONE_BY_ONE = 12


def fluctuations_of(laplacian: csr_array) -> NDArray[np.float64]:
    """Return the diagonal of the pseudo-inverse of a Laplacian.

    Parameters
    ----------
    laplacian : sparse array, shape (n, n)
        Symmetric, rows that sum to 0, entries off the diagonal 0 or below.

    Returns
    -------
    ndarray of float, shape (n,)
        Mean square fluctuation of each node in units of kT over the spring constant
        (times three), each connected part about its own mean; 0 for a lone node.

    Notes
    -----
    With one node held and G the inverse of the rest, bordered by zeros, the
    pseudo-inverse of a connected part of n nodes has the diagonal
    G_ii - (2/n) (G 1)_i + 1'G1 / n^2. The diagonal of G comes from the sparse factor by
    selected inversion.
    """
    part = connected_components(laplacian, directed=False)[1]
    out = np.zeros(laplacian.shape[0])
    order = np.argsort(part, kind="stable")
    bounds = np.flatnonzero(np.diff(part[order])) + 1
    for nodes in np.split(order, bounds):
        if len(nodes) > 1:
            block = csc_array(laplacian[nodes][:, nodes])
            out[nodes] = _fluctuations_of_part(block)
    return out


def _fluctuations_of_part(block: csc_array) -> NDArray[np.float64]:
    n_nodes = block.shape[0]
    held = int(np.argmax(block.diagonal()))  # the best tied node: good conditioning
    free = np.delete(np.arange(n_nodes), held)
    factor = factorise(csc_array(block[free][:, free]))
    diagonal, response = np.zeros(n_nodes), np.zeros(n_nodes)
    diagonal[free] = selected_inverse_diagonal(factor)
    response[free] = factor.solve(np.ones(n_nodes - 1))
    mean = response.sum() / n_nodes**2
    return np.asarray(diagonal - 2 / n_nodes * response + mean)


def factorise(matrix: csc_array) -> SuperLU:
    """Return the factors of a symmetric positive definite matrix, pivots in place.

    Parameters
    ----------
    matrix : sparse array, shape (n, n)
        Symmetric and positive definite.

    Returns
    -------
    SuperLU
        L of ones on the diagonal, U = D L'.
    """
    return splu(
        matrix.tocsc(),
        permc_spec="MMD_AT_PLUS_A",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True},
    )


def selected_inverse_diagonal(factor: SuperLU) -> NDArray[np.float64]:
    """Return the diagonal of an inverse from its sparse factors.

    Parameters
    ----------
    factor : SuperLU
        What `factorise` returns.

    Returns
    -------
    ndarray of float, shape (n,)
        In the order of the matrix.

    Notes
    -----
    Takahashi's recursion [1]_: with L D L' = A and Z = A^-1, the entries of Z on the
    pattern of L follow from those below and to the right alone. Columns of equal
    pattern are taken together as dense blocks, each read from the block of its parent
    in the elimination tree [2]_.

    References
    ----------
    .. [1] Takahashi, Fagan and Chin, Proc. 8th PICA Conference, 63 (1973; cited from
       memory).
    .. [2] Duff and Reid, ACM Trans. Math. Softw. 9, 302 (1983; cited from memory).
    """
    if not np.array_equal(factor.perm_r, factor.perm_c):
        return _diagonal_by_solves(factor)
    lower = _closed_pattern(csc_array(factor.L))
    blocks = _find_blocks(lower)
    pivots = factor.U.diagonal()
    diagonal = np.empty(lower.shape[0])
    fronts: dict[int, NDArray[np.float64]] = {}
    waiting = np.bincount(
        blocks.parent[blocks.parent >= 0], minlength=len(blocks.start)
    )
    for block in range(len(blocks.start) - 1, -1, -1):
        parent = int(blocks.parent[block])
        front = _front(lower, blocks, block, pivots, fronts.get(parent))
        start, width = int(blocks.start[block]), int(blocks.width[block])
        diagonal[start : start + width] = front.diagonal()[:width]
        if waiting[block]:
            fronts[block] = front
        if parent >= 0:
            waiting[parent] -= 1
            if not waiting[parent]:
                del fronts[parent]
    return np.asarray(diagonal[factor.perm_c])


def _diagonal_by_solves(factor: SuperLU) -> NDArray[np.float64]:
    """Return the same by solving for the unit vectors, some at a time."""
    n_rows = factor.shape[0]
    out = np.empty(n_rows)
    for start in range(0, n_rows, SOLVED_AT_ONCE):
        stop = min(start + SOLVED_AT_ONCE, n_rows)
        units = np.zeros((n_rows, stop - start))
        units[np.arange(start, stop), np.arange(stop - start)] = 1
        solved = factor.solve(units)
        out[start:stop] = solved[np.arange(start, stop), np.arange(stop - start)]
    return out


def _closed_pattern(lower: csc_array) -> csc_array:
    """Add the entries that became 0 by chance: a parent holds what its children hold.

    The parent of column j is the first row below its diagonal; every later row of j
    must be a row of that parent.
    """
    n_rows = lower.shape[0]
    while True:
        lower.sort_indices()
        column = np.repeat(np.arange(n_rows), np.diff(lower.indptr))
        row = lower.indices.astype(np.int64)
        parent = _parents(lower)[column]
        wanted = np.flatnonzero(row > parent)
        wanted = wanted[parent[wanted] >= 0]
        keys = column * n_rows + row
        asked = parent[wanted] * n_rows + row[wanted]
        place = np.minimum(np.searchsorted(keys, asked), len(keys) - 1)
        lacking = np.unique(asked[keys[place] != asked])
        if not len(lacking):
            return lower
        zeros = np.zeros(len(lacking))
        data = np.concatenate([lower.data, zeros])
        rows = np.concatenate([row, lacking % n_rows])
        columns = np.concatenate([column, lacking // n_rows])
        lower = coo_array((data, (rows, columns)), shape=lower.shape).tocsc()


def _parents(lower: csc_array) -> NDArray[np.int64]:
    """Return the first row below the diagonal of each column, -1 for none."""
    below = np.diff(lower.indptr) > 1
    out = np.full(lower.shape[0], -1)
    out[below] = lower.indices[lower.indptr[:-1][below] + 1]
    return out


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Blocks:
    """Runs of columns with the same rows below; `rows` of each from its diagonal on."""

    start: NDArray[np.int64]
    width: NDArray[np.int64]
    parent: NDArray[np.int64]
    rows: list[NDArray[np.int64]]


def _find_blocks(lower: csc_array) -> _Blocks:
    parent_column = _parents(lower)
    height = np.diff(lower.indptr)
    follows = (parent_column[:-1] == np.arange(1, len(height))) & (
        height[:-1] == height[1:] + 1
    )
    start = np.flatnonzero(np.concatenate([[True], ~follows]))
    width = np.diff(np.append(start, len(height)))
    last = parent_column[start + width - 1]
    parent = np.searchsorted(start, last, side="right") - 1
    bounds = lower.indptr
    rows = [lower.indices[bounds[first] : bounds[first + 1]] for first in start]
    return _Blocks(
        start=start, width=width, parent=np.where(last < 0, -1, parent), rows=rows
    )


def _front(
    lower: csc_array,
    blocks: _Blocks,
    block: int,
    pivots: NDArray[np.float64],
    parent_front: NDArray[np.float64] | None,
) -> NDArray[np.float64]:
    """Return the inverse on the rows of a block."""
    start, width, rows = (
        int(blocks.start[block]),
        int(blocks.width[block]),
        blocks.rows[block],
    )
    known = np.zeros((0, 0))
    if parent_front is not None:
        above = blocks.rows[int(blocks.parent[block])]
        chosen = above.searchsorted(rows[width:])
        known = parent_front[chosen[:, None], chosen]
    if width == 1:
        first = lower.indptr[start]
        below = lower.data[first + 1 : first + len(rows)]
        return _bordered(known, below, pivot=float(pivots[start]))
    columns = np.zeros((len(rows), width))
    for offset in range(width):
        first = lower.indptr[start + offset]
        columns[offset:, offset] = lower.data[first : first + len(rows) - offset]
    inverse = _inverse_of_lower(columns[:width])
    reach = columns[width:] @ inverse
    across = -known @ reach
    front = np.empty((len(rows), len(rows)))
    front[width:, width:] = known
    front[width:, :width] = across
    front[:width, width:] = across.T
    own = inverse / pivots[start : start + width, None]
    front[:width, :width] = inverse.T @ own - reach.T @ across
    return front


def _inverse_of_lower(lower: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the inverse of a lower triangle with ones on its diagonal, by halves.

    A routine of a linear algebra library sets several threads on even the smallest.
    """
    n_rows = len(lower)
    inverse = np.eye(n_rows)
    if n_rows <= ROWS_ONE_BY_ONE:
        for row in range(1, n_rows):
            inverse[row, :row] = -lower[row, :row] @ inverse[:row, :row]
        return inverse
    half = n_rows // 2
    inverse[:half, :half] = _inverse_of_lower(lower[:half, :half])
    inverse[half:, half:] = _inverse_of_lower(lower[half:, half:])
    across = inverse[half:, half:] @ lower[half:, :half] @ inverse[:half, :half]
    inverse[half:, :half] = -across
    return inverse


def _bordered(
    known: NDArray[np.float64], below: NDArray[np.float64], *, pivot: float
) -> NDArray[np.float64]:
    """Return the inverse on the rows of a single column."""
    across = -(known @ below)
    front = np.empty((len(below) + 1, len(below) + 1))
    front[1:, 1:] = known
    front[1:, 0] = front[0, 1:] = across
    front[0, 0] = 1 / pivot - below @ across
    return front
