"""Chance of a statistic by permutation, with no more permutations than needed."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import bdtr, bdtrc

from structmap.motional_units.field import Floats

PERMUTATIONS, MOST_PERMUTATIONS = 999, 9999
LEVEL = 0.05
# Looks at whether a chance of exactly the level may be ruled out, at this risk each.
LOOKS, RISK = (299, PERMUTATIONS, 2499, 4999), 0.001
# Between looks so many hits are enough where they put p above this.
CLEAR_HITS, CLEARLY_ABOVE = 20, 0.08
# The first draws are few, since many answers are clear after some dozens.
FIRST_BATCH = 40
# Rows laid side by side in one call: large enough for numpy, small enough for caches.
ROWS_AT_ONCE = 30_000


@dataclass(frozen=True, slots=True, kw_only=True)
class Chance:
    """A permutation p value.

    Attributes
    ----------
    p : float
        Never 0.
    hits, tries : int
        Permutations at least as extreme as the data, and all that were drawn.
    """

    p: float
    hits: int
    tries: int


def find_chance(
    observed: float,
    draw: Callable[[int], Floats],
    *,
    batch: int,
    most: int = MOST_PERMUTATIONS,
) -> Chance:
    """Return the chance of a statistic at least as large as the observed one.

    Parameters
    ----------
    observed : float
        The statistic of the data.
    draw : callable
        Gives the statistic of that many further permutations.
    batch : int
        Most to draw at a time.
    most : int
        Most permutations, drawn where p lies at the border of significance.

    Returns
    -------
    Chance
        ``(1 + hits) / (1 + tries)``. Drawing ends where 20 hits show a p above 0.08
        (then ``hits / tries``), after 299, 999, 2,499 or 4,999 tries where so many
        hits, or so few, would come from a chance of 0.05 less than once in a thousand
        times, else after `most`.

    References
    ----------
    .. [1] Phipson and Smyth, Stat. Appl. Genet. Mol. Biol. 9, 39 (2010).
    .. [2] Besag and Clifford, Biometrika 78, 301-304 (1991).
    """
    hits = tries = 0
    for goal in (*(look for look in LOOKS if look < most), most):
        while tries < goal:
            size = min(batch, max(FIRST_BATCH, tries), goal - tries)
            drawn = draw(size) >= observed
            clear = _clear_at(drawn, hits, tries)
            if clear is not None:
                return Chance(p=CLEAR_HITS / clear, hits=CLEAR_HITS, tries=clear)
            hits, tries = hits + int(drawn.sum()), tries + len(drawn)
        if _rules_out_level(hits, tries):
            break
    return Chance(p=(1 + hits) / (1 + tries), hits=hits, tries=tries)


def _rules_out_level(hits: int, tries: int) -> bool:
    fewer = bdtr(hits, tries, LEVEL)
    more = bdtrc(hits - 1, tries, LEVEL) if hits else 1.0
    return bool(2 * min(fewer, more) < RISK)


def _clear_at(drawn: np.ndarray, hits: int, tries: int) -> int | None:
    """Tell the try at which 20 hits were reached, if p is above the border there."""
    count = hits + np.cumsum(drawn)
    reached = int(np.searchsorted(count, CLEAR_HITS))
    if hits >= CLEAR_HITS or reached == len(drawn):
        return None
    at = tries + reached + 1
    return at if CLEAR_HITS / at > CLEARLY_ABOVE else None


def batch_size(n_rows: int) -> int:
    """Return how many permutations to lay side by side.

    Parameters
    ----------
    n_rows : int
        Rows of one problem.

    Returns
    -------
    int
        From 1 to 250.
    """
    return int(np.clip(ROWS_AT_ONCE // max(n_rows, 1), 1, 250))
