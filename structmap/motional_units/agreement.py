"""How well two ways to part the same rows agree."""

import numpy as np

from structmap.motional_units.field import Integers


def adjusted_rand_index(one: Integers, other: Integers) -> float:
    """Return how well two partitions agree beyond chance.

    Parameters
    ----------
    one, other : ndarray of int, shape (n_rows,)
        Group of each row, under any numbers; rows in no group are a group of their own.

    Returns
    -------
    float
        1 when they are the same, 0 on average for random ones of the same sizes; below
        0 is possible.

    References
    ----------
    .. [1] Hubert and Arabie, J. Classif. 2, 193-218 (1985).
    """
    n_rows = len(one)
    if n_rows < 2:
        return 1.0
    first = np.unique(one, return_inverse=True)[1]
    second = np.unique(other, return_inverse=True)[1]
    both = np.unique(first * (second.max() + 1) + second, return_counts=True)[1]
    shared = _count_pairs(both)
    in_one = _count_pairs(np.bincount(first))
    in_other = _count_pairs(np.bincount(second))
    expected = in_one * in_other / _count_pairs(np.array([n_rows]))
    largest = (in_one + in_other) / 2
    if largest == expected:  # all in one group, or each row in its own, in both
        return 1.0
    return (shared - expected) / (largest - expected)


def _count_pairs(sizes: Integers) -> float:
    return float((sizes * (sizes - 1) // 2).sum())
