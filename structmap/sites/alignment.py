"""Alignment of two sequences, ends free, by dynamic programming."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only
from structmap.sites.residue_names import UNKNOWN

# Whole numbers in the proportion 2 : -1 : -5 : -0.5 that suits near-identical
# sequences: a gap must pay for itself by three residues that then agree.
MATCH, MISMATCH, GAP_OPEN, GAP_EXTEND = 4, -2, -10, -1


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Alignment:
    """Two sequences laid on each other.

    Attributes
    ----------
    score : int
        In units of a quarter of a match.
    pairs : ndarray of int, shape (n_pairs, 2)
        Positions of the first and of the second sequence that stand together, rising.
    """

    score: int
    pairs: NDArray[np.int64]

    def __post_init__(self) -> None:
        store_read_only(self, "pairs", np.int64, (None, 2))


def align_sequences(first: str, second: str) -> Alignment:
    """Align two sequences of letters globally, gaps at the ends free.

    Parameters
    ----------
    first, second : str
        One letter a residue; ``X`` agrees with anything at no gain and no cost.

    Returns
    -------
    Alignment
        One of the best ones.

    Notes
    -----
    Affine gaps after Gotoh [1]_ (cited from memory), one row at a time: the gap along
    the row is a running maximum, since to open a second gap from a gap never pays.

    References
    ----------
    .. [1] O. Gotoh, J. Mol. Biol. 162, 705-708 (1982).
    """
    n, m = len(first), len(second)
    score = _pair_scores(first, second)
    best = np.zeros((n + 1, m + 1), dtype=np.int64)
    down = np.full((n + 1, m + 1), np.iinfo(np.int64).min // 2)
    ramp = GAP_EXTEND * np.arange(m + 1)
    for i in range(1, n + 1):
        down[i] = np.maximum(best[i - 1] + GAP_OPEN, down[i - 1] + GAP_EXTEND)
        here = down[i].copy()
        here[1:] = np.maximum(here[1:], best[i - 1, :-1] + score[i - 1])
        here[0] = 0  # a free gap at the start
        along = (
            np.maximum.accumulate(here - ramp)[:-1] + ramp[1:] + GAP_OPEN - GAP_EXTEND
        )
        best[i] = here
        best[i, 1:] = np.maximum(here[1:], along)
    ends = [(int(best[n, j]), n, j) for j in range(m + 1)]
    ends += [(int(best[i, m]), i, m) for i in range(n + 1)]
    top = max(ends)
    pairs = _trace_back(score, best, down, top[1:])
    return Alignment(score=top[0], pairs=np.array(pairs).reshape(-1, 2))


def _pair_scores(first: str, second: str) -> NDArray[np.int64]:
    a, b = np.array(list(first), dtype="<U1"), np.array(list(second), dtype="<U1")
    score = np.where(a[:, None] == b[None, :], MATCH, MISMATCH)
    score[(a == UNKNOWN), :] = 0
    score[:, (b == UNKNOWN)] = 0
    return score.astype(np.int64)


def _trace_back(
    score: NDArray[np.int64],
    best: NDArray[np.int64],
    down: NDArray[np.int64],
    end: tuple[int, int],
) -> list[tuple[int, int]]:
    """Return the pairs of one best path that ends at a cell."""
    i, j = end
    pairs: list[tuple[int, int]] = []
    while i > 0 and j > 0:
        if best[i, j] == best[i - 1, j - 1] + score[i - 1, j - 1]:
            i, j = i - 1, j - 1
            pairs.append((i, j))
        elif best[i, j] == down[i, j]:
            while down[i, j] != best[i - 1, j] + GAP_OPEN:
                i -= 1
            i -= 1
        else:
            length = 1
            while (
                best[i, j] != best[i, j - length] + GAP_OPEN + (length - 1) * GAP_EXTEND
            ):
                length += 1
            j -= length
    return pairs[::-1]
