"""From seeds to motional units: who gains by belonging, and whether it pays."""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from structmap.motional_units.field import (
    Booleans,
    Field,
    Floats,
    Integers,
    Links,
    spread_neighbours,
)
from structmap.motional_units.grouping import (
    AMPLITUDE_SCATTER,
    grow_seeds,
    screen_pairs,
    unlikeness,
)

# Price of a member and worth of an edge inside a unit, in log-likelihood; settled on
# planted problems apart from those that the method is judged by.
MEMBER_PRICE = 3.5
EDGE_WORTH = 0.8
ENERGY_GATE = 5.0
SMALLEST_UNIT = 3
MOST_PASSES = 10
# For the tests of chance: gains are capped, so that one huge value cannot make a
# cluster, and edges count more, because chance clusters are stringy.
GAIN_CAP = 8.0
COMPACT_EDGE_WORTH = 2.8


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Grouping:
    """Units over the rows of a field.

    Attributes
    ----------
    label : ndarray of int, shape (n_rows,)
        Unit of each row, -1 for none; units are numbered by their first row.
    energy : ndarray of float, shape (n_units,)
        Log-likelihood gained by each unit less its price.
    capped_energy : ndarray of float, shape (n_units,)
        The same with capped gains and heavier edges, for the tests of chance.
    first_row : ndarray of int, shape (n_units,)
        First row of each unit.
    """

    label: Integers
    energy: Floats
    capped_energy: Floats
    first_row: Integers


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Profiles:
    """Sums over the members of units.

    Attributes
    ----------
    weight : ndarray of float, shape (n_units, 1) or (n_units, n_columns)
        Summed weights.
    push : ndarray of float, shape (n_units, n_columns)
        Summed weighted deviations; over `weight`, the profile of the unit.
    """

    weight: Floats
    push: Floats


def find_groups(field: Field, links: Links) -> Grouping:
    """Find units in one field: screen pairs, grow seeds, refine, gate.

    Parameters
    ----------
    field : Field
        Deviations from the background.
    links : Links
        Who touches whom.

    Returns
    -------
    Grouping
        The units that pay.
    """
    label = grow_seeds(field, screen_pairs(field, links))
    return gate_groups(field, links, refine_groups(field, links, label))


def refine_groups(field: Field, links: Links, label: Integers) -> Integers:
    """Let sites join the unit in which they gain most until nothing changes.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.
    label : ndarray of int, shape (n_rows,)
        Seeds, -1 for none.

    Returns
    -------
    ndarray of int, shape (n_rows,)
        Connected units of two or more rows, numbered by their first row.
    """
    label = split_connected(links, label)
    for _ in range(MOST_PASSES):
        new = split_connected(links, _reassign(field, links, label))
        if np.array_equal(new, label):
            break
        label = new
    return label


def _reassign(field: Field, links: Links, label: Integers) -> Integers:
    out = np.full_like(label, -1)
    rows = np.flatnonzero(label >= 0)
    if not len(rows):
        return out
    position, site = spread_neighbours(links, rows)
    key = label[rows][position] * links.n_rows + site
    key, n_inside = np.unique(key, return_counts=True)
    unit, site = np.divmod(key, links.n_rows)
    gain = belonging_gain(
        field, sum_profiles(field, label), site, unit, label[site] == unit
    )
    score = gain - MEMBER_PRICE + EDGE_WORTH * links.factor * n_inside
    paying = np.flatnonzero(score > 0)
    unit, site, score = unit[paying], site[paying], score[paying]
    order = np.lexsort((unit, -score, site))
    best = order[np.unique(site[order], return_index=True)[1]]
    out[site[best]] = unit[best]
    return out


def split_connected(links: Links, label: Integers) -> Integers:
    """Split units into connected parts and drop parts of one row.

    Parameters
    ----------
    links : Links
        Who touches whom.
    label : ndarray of int, shape (n_rows,)
        Unit of each row, -1 for none.

    Returns
    -------
    ndarray of int, shape (n_rows,)
        The parts, numbered by their first row.
    """
    out = np.full_like(label, -1)
    rows = np.flatnonzero(label >= 0)
    if not len(rows):
        return out
    position, other = spread_neighbours(links, rows)
    same = label[other] == label[rows][position]
    number = np.full(links.n_rows, -1)
    number[rows] = np.arange(len(rows))
    ends = (position[same], number[other[same]])
    graph = coo_array(
        (np.ones(len(ends[0]), np.int8), ends), shape=(len(rows), len(rows))
    )
    part = connected_components(graph, directed=False)[1]
    size = np.bincount(part)
    out[rows] = _number_by_first(np.where(size[part] >= 2, part, -1))
    return out


def _number_by_first(part: Integers) -> Integers:
    """Renumber parts by where they first appear; -1 stays."""
    used = np.flatnonzero(part >= 0)
    if not len(used):
        return np.asarray(part, np.int64)
    _, first, inverse = np.unique(part[used], return_index=True, return_inverse=True)
    rank = np.empty(len(first), np.int64)
    rank[np.argsort(first)] = np.arange(len(first))
    out = np.full(len(part), -1, np.int64)
    out[used] = rank[inverse]
    return out


def sum_profiles(field: Field, label: Integers) -> Profiles:
    """Return the summed weights and weighted deviations of units.

    Parameters
    ----------
    field : Field
        Deviations.
    label : ndarray of int, shape (n_rows,)
        Unit of each row, -1 for none.

    Returns
    -------
    Profiles
        One row a unit.
    """
    rows = np.flatnonzero(label >= 0)
    unit = label[rows]
    n_units = int(unit.max(initial=-1)) + 1
    weight = field.weight[rows]
    return Profiles(
        weight=_sum_by(unit, weight, n_units),
        push=_sum_by(unit, weight * field.value[rows], n_units),
    )


def _sum_by(unit: Integers, values: Floats, n_units: int) -> Floats:
    columns = [np.bincount(unit, column, minlength=n_units) for column in values.T]
    return np.stack(columns, axis=1) if columns else np.zeros((n_units, 0))


def belonging_gain(
    field: Field, profiles: Profiles, site: Integers, unit: Integers, inside: Booleans
) -> Floats:
    """Return what the log-likelihood of a site gains when it belongs to a unit.

    The site is always left out of the profile that it is held against, and the
    uncertainty of that profile is charged for.

    Parameters
    ----------
    field : Field
        Deviations.
    profiles : Profiles
        Sums of the units.
    site, unit : ndarray of int, shape (n_pairs,)
        Which site is held against which unit.
    inside : ndarray of bool, shape (n_pairs,)
        Whether the site is among the members summed up in `profiles`.

    Returns
    -------
    ndarray of float, shape (n_pairs,)
        Gains.
    """
    value, weight = field.value[site], field.weight[site]
    own = weight * inside[:, None]
    total = profiles.weight[unit] - own
    known = total > 1e-9 * weight
    safe = np.where(known, total, 1.0)
    mean = np.where(known, (profiles.push[unit] - own * value) / safe, 0.0)
    relative = np.where(known, weight / safe, 0.0)
    precision = np.where(known, weight / (1 + relative), 0.0)
    scatter = np.full(len(site), AMPLITUDE_SCATTER**2)
    misfit = unlikeness(value - mean, precision, scatter, mean)
    spread = np.einsum("ij,ij->i", mean * mean, np.broadcast_to(precision, mean.shape))
    rest = np.einsum(
        "ij,ij->i", value * value, np.broadcast_to(weight * known, mean.shape)
    )
    charge = _charge(np.log1p(relative), field.freedom[site])
    gain: Floats = 0.5 * (
        rest - misfit - charge - np.log1p(AMPLITUDE_SCATTER**2 * spread)
    )
    return gain


def _charge(logs: Floats, freedom: Integers) -> Floats:
    if logs.shape[1] == 1:
        return freedom * logs[:, 0]
    out: Floats = logs.sum(1)
    return out


def gate_groups(field: Field, links: Links, label: Integers) -> Grouping:
    """Drop units that are too small, do not pay or deviate the wrong way.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.
    label : ndarray of int, shape (n_rows,)
        Units, -1 for none.

    Returns
    -------
    Grouping
        The units left.
    """
    group = weigh_groups(field, links, label)
    size = np.bincount(label[label >= 0], minlength=len(group.energy))
    good = (size >= SMALLEST_UNIT) & (group.energy >= ENERGY_GATE)
    if field.direction and len(good):
        good &= sum_profiles(field, label).push.sum(1) * field.direction > 0
    number = np.append(np.cumsum(good) - 1, -1)
    number[:-1][~good] = -1
    return Grouping(
        label=number[label],
        energy=group.energy[good],
        capped_energy=group.capped_energy[good],
        first_row=group.first_row[good],
    )


def weigh_groups(field: Field, links: Links, label: Integers) -> Grouping:
    """Return the energies of given units.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.
    label : ndarray of int, shape (n_rows,)
        Units numbered from 0 without gaps, -1 for none.

    Returns
    -------
    Grouping
        With all the units.
    """
    rows = np.flatnonzero(label >= 0)
    unit = label[rows]
    n_units = int(unit.max(initial=-1)) + 1
    gain = belonging_gain(
        field, sum_profiles(field, label), rows, unit, np.ones(len(rows), bool)
    )
    position, other = spread_neighbours(links, rows)
    inner = label[other] == unit[position]
    edges = np.bincount(unit[position[inner]], minlength=n_units) / 2
    price = MEMBER_PRICE * np.bincount(unit, minlength=n_units)
    plain = np.bincount(unit, gain, minlength=n_units)
    capped = np.bincount(unit, np.minimum(gain, GAIN_CAP), minlength=n_units)
    first_row = np.full(n_units, links.n_rows)
    np.minimum.at(first_row, unit, rows)
    return Grouping(
        label=label,
        energy=plain - price + EDGE_WORTH * links.factor * edges,
        capped_energy=capped - price + COMPACT_EDGE_WORTH * links.factor * edges,
        first_row=first_row,
    )
