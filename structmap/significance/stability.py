"""Whether units come back when errors are redrawn and the cutoff is varied."""

from dataclasses import dataclass, replace

import numpy as np

from structmap.motional_units.degree import search_samples
from structmap.motional_units.field import Floats, Integers, Links
from structmap.motional_units.search import UnitSearch
from structmap.significance.chance import batch_size

REPEATS, FEWEST_REPEATS = 100, 20
# Rows times repeats beyond which fewer repeats must do.
ROWS_TO_SPEND = 200_000
ROUNDS = 2
LARGE = 2000


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Recurrence:
    """How often units and their members came back.

    Attributes
    ----------
    stability : ndarray of float, shape (n_units,)
        Mean Jaccard index of each unit with its best match in a repeat.
    share : ndarray of float, shape (n_units, n_rows)
        Share of the repeats that found a unit again in which a row is in its best
        match.
    repeats : int
        How many repeats were made.
    """

    stability: Floats
    share: Floats
    repeats: int


def find_recurrence(
    search: UnitSearch,
    links: tuple[Links, ...],
    *,
    noise: float,
    repeats: int,
    rng: np.random.Generator,
) -> Recurrence:
    """Search again with redrawn errors on each of several contact graphs.

    Parameters
    ----------
    search : UnitSearch
        The units.
    links : tuple of Links
        Contacts at several cutoffs; the repeats are shared out evenly.
    noise : float
        Size of the noise added, in scaled errors.
    repeats : int
        Searches over all graphs; fewer are made of many sites.
    rng : numpy.random.Generator
        Where chance comes from.

    Returns
    -------
    Recurrence
        Over all repeats.
    """
    n_rows, n_units = len(search.label), len(search.members)
    total = int(
        np.clip(ROWS_TO_SPEND // max(n_rows, 1), min(FEWEST_REPEATS, repeats), repeats)
    )
    each = -(-total // len(links))
    sums = _Sums(n_units, n_rows)
    for contacts in links:
        left = each
        while left:
            count = min(left, batch_size(n_rows), 25)
            found = _search_redrawn(search, contacts, (count, noise), rng)
            _match(search.label, found, sums)
            left -= count
    made = each * len(links)
    return Recurrence(
        stability=sums.jaccard / made,
        share=sums.joined / np.maximum(sums.matches, 1)[:, None],
        repeats=made,
    )


class _Sums:
    """Sums over repeats: Jaccard indices, matches, memberships in the best match."""

    def __init__(self, n_units: int, n_rows: int) -> None:
        self.jaccard, self.matches = np.zeros(n_units), np.zeros(n_units)
        self.joined = np.zeros((n_units, n_rows))


def _search_redrawn(
    search: UnitSearch,
    links: Links,
    count_and_noise: tuple[int, float],
    rng: np.random.Generator,
) -> Integers:
    """Return the units of samples with noise added, shape (n_samples, n_rows)."""
    count, noise = count_and_noise
    known = search.samples
    scaled = search.scale * known.error[:, None]
    added = rng.standard_normal((count, *known.value.shape[1:]))
    if known.lost:
        added -= added.mean(2, keepdims=True)
    value = known.value + noise * scaled * added
    if known.seen is not None:
        value = np.where(known.seen, value, 0.0)
    samples = replace(known, value=value)
    bases = search.bases
    if len(search.label) > LARGE:
        bases = (search.bases[search.behaviour.degree],)
    return search_samples(
        samples, links, bases=bases, rounds=ROUNDS, direction=search.direction
    ).label


def _match(label: Integers, found: Integers, sums: _Sums) -> None:
    """Hold each unit against its best match in each sample, and add up."""
    n_units = len(sums.jaccard)
    n_samples = len(found)
    used = found >= 0
    dense = np.full(found.shape, -1)
    dense[used] = np.unique(found[used], return_inverse=True)[1]
    n_found = int(dense.max(initial=-1)) + 1
    sample = np.zeros(n_found, np.int64)
    at_sample, at_row = np.nonzero(used)
    sample[dense[used]] = at_sample
    size = np.bincount(dense[used], minlength=n_found)
    inside = label[at_row] >= 0
    key = dense[used][inside] * max(n_units, 1) + label[at_row][inside]
    overlap = np.bincount(key, minlength=n_found * n_units).reshape(n_found, n_units)
    own = np.bincount(label[label >= 0], minlength=n_units)
    index = overlap / np.maximum(size[:, None] + own - overlap, 1)
    for unit in range(n_units):
        best = _best_in_sample(index[:, unit], sample, n_samples)
        good = best >= 0
        sums.jaccard[unit] += index[best[good], unit].sum()
        sums.joined[unit] += (dense[good] == best[good][:, None]).sum(0)
        sums.matches[unit] += good.sum()


def _best_in_sample(index: Floats, sample: Integers, n_samples: int) -> Integers:
    """Return the found unit with the largest overlap in each sample, -1 for none."""
    order = np.lexsort((np.arange(len(index)), -index, sample))
    order = order[index[order] > 0]
    best = np.full(n_samples, -1)
    samples, first = np.unique(sample[order], return_index=True)
    best[samples] = order[first]
    return best
