"""From pairs in contact that deviate alike to seeds of motional units."""

from dataclasses import dataclass

import numpy as np

from structmap.motional_units.field import Field, Floats, Integers, Links, chi2_limits

# Members of a unit scatter in amplitude by this share of the unit's profile.
AMPLITUDE_SCATTER = 0.2
# Chance of turning down a pair that belongs together, and of letting two sites at
# rest through.
PAIR_CHANCE = 1e-3


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class PassingPairs:
    """Edges whose ends deviate together and alike.

    Attributes
    ----------
    first, second : ndarray of int, shape (n_pairs,)
        Rows.
    cost : ndarray of float, shape (n_pairs,)
        How unlike they are, to be held against chi-square.
    """

    first: Integers
    second: Integers
    cost: Floats


def unlikeness(
    difference: Floats, precision: Floats, scatter: Floats, mean: Floats
) -> Floats:
    """Return how far two profiles differ beyond errors and a common scale factor.

    The squared length of the difference under the covariance ``V + c m m'``, by the
    formula of Sherman and Morrison: V are the errors, the second term lets the
    amplitude along the common profile m vary.

    Parameters
    ----------
    difference : ndarray of float, shape (n_pairs, n_columns)
        Difference d of the profiles.
    precision : ndarray of float, shape (n_pairs, 1) or (n_pairs, n_columns)
        Inverse of the diagonal V; 0 where a column is missing.
    scatter : ndarray of float, shape (n_pairs,)
        Relative variance c of the amplitude.
    mean : ndarray of float, shape (n_pairs, n_columns)
        Common profile m.

    Returns
    -------
    ndarray of float, shape (n_pairs,)
        Distributed as chi-square when the profiles are alike.

    References
    ----------
    .. [1] Sherman and Morrison, Ann. Math. Stat. 21, 124-127 (1950).
    """
    scaled = difference * precision
    plain = np.einsum("ij,ij->i", difference, scaled)
    along = np.einsum("ij,ij->i", mean, scaled)
    spread = np.einsum("ij,ij->i", mean * mean, np.broadcast_to(precision, mean.shape))
    out: Floats = plain - scatter * along**2 / (1 + scatter * spread)
    return out


def screen_pairs(field: Field, links: Links) -> PassingPairs:
    """Return the edges whose two ends deviate together and alike.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.

    Returns
    -------
    PassingPairs
        In the order of the edges.
    """
    return _screen(field, links.first, links.second)


def screen_all_pairs(field: Field) -> Floats:
    """Return how unlike all pairs of rows are, in contact or not.

    Parameters
    ----------
    field : Field
        Deviations.

    Returns
    -------
    ndarray of float, shape (n_rows, n_rows)
        Symmetric; infinite for pairs that do not deviate together and alike.
    """
    n_rows = len(field.power)
    passing = _screen(field, *np.triu_indices(n_rows, 1))
    table = np.full((n_rows, n_rows), np.inf)
    table[passing.first, passing.second] = passing.cost
    table[passing.second, passing.first] = passing.cost
    return table


def look_up_pairs(table: Floats, orders: Integers, tiled: Links) -> PassingPairs:
    """Return the alike pairs in contact where rows sit at other places.

    Parameters
    ----------
    table : ndarray of float, shape (n_rows, n_rows)
        From `screen_all_pairs`.
    orders : ndarray of int, shape (n_orders, n_rows)
        Row that comes to each place.
    tiled : Links
        Contacts of that many copies laid side by side.

    Returns
    -------
    PassingPairs
        In the order of the edges.
    """
    flat = orders.ravel()
    cost = table[flat[tiled.first], flat[tiled.second]]
    alike = np.flatnonzero(np.isfinite(cost))
    return PassingPairs(
        first=tiled.first[alike], second=tiled.second[alike], cost=cost[alike]
    )


def _screen(field: Field, first: Integers, second: Integers) -> PassingPairs:
    limits = chi2_limits(1 - PAIR_CHANCE, field.value.shape[1])
    enough = field.power[first] + field.power[second]
    loud = enough >= limits[np.minimum(field.freedom[first], field.freedom[second])]
    first, second = first[loud], second[loud]
    moved = field.weight * field.value if len(first) else field.value
    total = field.weight[first] + field.weight[second]
    push = moved[first] + moved[second]
    joint = _joint_deviation(push, total)
    keep = joint >= limits[_joint_freedom(field, first, second)]
    if field.direction:
        keep &= push.sum(1) * field.direction > 0
    first, second, total, push = first[keep], second[keep], total[keep], push[keep]
    precision = _ratio(field.weight[first] * field.weight[second], total)
    scatter = np.full(len(first), 2 * AMPLITUDE_SCATTER**2)
    difference = field.value[first] - field.value[second]
    cost = unlikeness(difference, precision, scatter, _ratio(push, total))
    alike = cost <= _likeness_limit(limits, precision, field.freedom[first])
    return PassingPairs(first=first[alike], second=second[alike], cost=cost[alike])


def _ratio(upper: Floats, lower: Floats) -> Floats:
    """Divide, with 0 for 0/0: columns that nobody has measured."""
    if lower.shape[1] == 1:
        return upper / lower  # one weight for all columns is never 0
    safe = np.where(lower > 0, lower, 1.0)
    return np.where(lower > 0, upper / safe, 0.0)


def _joint_deviation(push: Floats, total: Floats) -> Floats:
    out: Floats = _ratio(push * push, total).sum(1)
    return out


def _joint_freedom(field: Field, first: Integers, second: Integers) -> Integers:
    if field.weight.shape[1] == 1:
        return field.freedom[first]
    out: Integers = ((field.weight[first] > 0) | (field.weight[second] > 0)).sum(1)
    return out


def _likeness_limit(limits: Floats, precision: Floats, freedom: Integers) -> Floats:
    """Limit of the unlikeness; none passes that has no column in common."""
    if precision.shape[1] == 1:
        return limits[freedom]
    common = (precision > 0).sum(1)
    return np.where(common > 0, limits[common], -1.0)


def grow_seeds(field: Field, pairs: PassingPairs) -> Integers:
    """Merge sites along passing pairs into seeds, the most alike first.

    In each round every pair of clusters that are each other's most alike neighbours
    merges, so that separate places advance at once and no order of rows matters.

    Parameters
    ----------
    field : Field
        Deviations.
    pairs : PassingPairs
        Edges along which clusters may merge.

    Returns
    -------
    ndarray of int, shape (n_rows,)
        Seed of each row, -1 for rows in none.
    """
    label = np.full(len(field.power), -1, np.int64)
    if not len(pairs.first):
        return label
    rows, compact = np.unique(
        np.concatenate([pairs.first, pairs.second]), return_inverse=True
    )
    clusters = _Clusters(field, rows)
    n_pairs = len(pairs.first)
    clusters.merge_all(compact[:n_pairs], compact[n_pairs:], pairs.cost)
    label[rows] = clusters.owner
    return label


class _Clusters:
    """Clusters while they merge: sums of weights and of weighted profiles."""

    def __init__(self, field: Field, rows: Integers) -> None:
        self.weight = field.weight[rows].copy()
        self.push = self.weight * field.value[rows]
        self.freedom = field.freedom[rows]
        self.size = np.ones(len(rows))
        self.owner = np.arange(len(rows))
        self.limits = chi2_limits(1 - PAIR_CHANCE, field.value.shape[1])

    def merge_all(self, first: Integers, second: Integers, cost: Floats) -> None:
        limit = self._limit(first, second)
        while True:
            able = cost <= limit
            if not able.any():
                return
            chosen = self._mutually_best(first, second, np.where(able, cost, np.inf))
            first, second, cost, limit = self._merge(
                first, second, (cost, limit), chosen
            )

    def _limit(self, first: Integers, second: Integers) -> Floats:
        precision = _ratio(
            self.weight[first] * self.weight[second],
            self.weight[first] + self.weight[second],
        )
        return _likeness_limit(self.limits, precision, self.freedom[first])

    def _mutually_best(
        self, first: Integers, second: Integers, cost: Floats
    ) -> Integers:
        order = np.lexsort((second, first, cost))
        rank = np.empty(len(order), np.int64)
        rank[order] = np.arange(len(order))
        best = np.full(len(self.owner), len(order))
        np.minimum.at(best, first, rank)
        np.minimum.at(best, second, rank)
        mutual = (best[first] == rank) & (best[second] == rank) & np.isfinite(cost)
        return np.flatnonzero(mutual)

    def _merge(
        self,
        first: Integers,
        second: Integers,
        known: tuple[Floats, Floats],
        chosen: Integers,
    ) -> tuple[Integers, Integers, Floats, Floats]:
        keep, gone = first[chosen], second[chosen]
        for sums in (self.weight, self.push, self.size):
            sums[keep] += sums[gone]
        into = np.arange(len(self.owner))
        into[gone] = keep
        self.owner = into[self.owner]
        changed = np.zeros(len(into), bool)
        changed[keep] = True
        low = np.minimum(into[first], into[second])
        high = np.maximum(into[first], into[second])
        _, once = np.unique(low * len(into) + high, return_index=True)
        once = once[low[once] != high[once]]
        low, high = low[once], high[once]
        cost, limit = known[0][once], known[1][once]
        stale = np.flatnonzero(changed[low] | changed[high])
        cost[stale] = self._cost(low[stale], high[stale])
        limit[stale] = self._limit(low[stale], high[stale])
        return low, high, cost, limit

    def _cost(self, first: Integers, second: Integers) -> Floats:
        total = self.weight[first] + self.weight[second]
        precision = _ratio(self.weight[first] * self.weight[second], total)
        difference = _ratio(self.push[first], self.weight[first]) - _ratio(
            self.push[second], self.weight[second]
        )
        mean = _ratio(self.push[first] + self.push[second], total)
        scatter = AMPLITUDE_SCATTER**2 * (1 / self.size[first] + 1 / self.size[second])
        return unlikeness(difference, precision, scatter, mean)
