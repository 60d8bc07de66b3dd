"""From seeds to motional units: who gains by belonging, and whether it pays."""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array
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
    PassingPairs,
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
# cluster; edges count more, because chance clusters are stringy; and members that
# differ from the unit's profile beyond errors are charged for it, because chance
# clusters are made of movers of different kinds.
GAIN_CAP = 8.0
COMPACT_EDGE_WORTH = 4.0
MISFIT_CHARGE = 1.5
# Beyond this squared deviation differences of squares lose what tells sites apart.
MOST_POWER = 1e10


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
        The same with capped gains, heavier edges and a charge for misfit, for the
        tests of chance.
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
    return extend_pairs(field, links, screen_pairs(field, links))


def extend_pairs(field: Field, links: Links, pairs: PassingPairs) -> Grouping:
    """Find units in one field whose alike pairs in contact are known.

    Parameters
    ----------
    field : Field
        Deviations from the background.
    links : Links
        Who touches whom.
    pairs : PassingPairs
        Pairs in contact that deviate alike.

    Returns
    -------
    Grouping
        The units that pay.
    """
    label = grow_seeds(field, pairs)
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
    root = _split_roots(links, np.flatnonzero(label >= 0), label)
    rows = np.flatnonzero(root >= 0)
    for _ in range(MOST_PASSES):
        changed = _reassign(field, links, root, rows)
        if not changed.any():
            break
        # Copies of the problem that have settled are left alone.
        rows = np.flatnonzero((root >= 0) & np.repeat(changed, links.n_copy))
    return _number_roots(root)


def _reassign(field: Field, links: Links, root: Integers, rows: Integers) -> Booleans:
    """Move sites of some copies to where they gain most; tell which copies changed."""
    touched = np.zeros(links.n_rows // max(links.n_copy, 1), bool)
    if not len(rows):
        return touched
    roots, member_unit = np.unique(root[rows], return_inverse=True)
    position, site = spread_neighbours(links, rows)
    key, n_inside = np.unique(
        member_unit[position] * links.n_rows + site, return_counts=True
    )
    unit, site = np.divmod(key, links.n_rows)
    worth = EDGE_WORTH * links.factor * n_inside - MEMBER_PRICE
    sums = _sum_members(field, rows, member_unit)
    able = np.flatnonzero(_most_gain(field, sums, site=site, unit=unit) + worth > 0)
    unit, site, worth = unit[able], site[able], worth[able]
    found = weigh_belonging(
        field,
        sums,
        site=site,
        unit=unit,
        inside=root[site] == roots[unit],
    )
    score = found.gain + worth
    paying = np.flatnonzero(score > 0)
    unit, site, score = unit[paying], site[paying], score[paying]
    order = np.lexsort((unit, -score, site))
    best = order[np.unique(site[order], return_index=True)[1]]
    label = np.full(links.n_rows, -1)
    label[site[best]] = unit[best]
    new = _split_roots(links, site[best], label)
    affected = np.union1d(rows, site[best])
    different = affected[new[affected] != root[affected]]
    root[affected] = new[affected]
    touched[different // links.n_copy] = True
    return touched


def _most_gain(
    field: Field, sums: Profiles, *, site: Integers, unit: Integers
) -> Floats:
    """Return what sites gain by belonging at most, when they fit without misfit."""
    most: Floats = 0.5 * field.power[site]
    if field.weight.shape[1] == 1:
        relative = field.weight[site, 0] / sums.weight[unit, 0]
        most -= 0.5 * field.freedom[site] * np.log1p(relative)
    return most


def _split_roots(links: Links, rows: Integers, label: Integers) -> Integers:
    """Split labelled rows into connected parts of two or more, named by first rows."""
    root = np.full(links.n_rows, -1)
    if not len(rows):
        return root
    position, other = spread_neighbours(links, rows)
    same = label[other] == label[rows][position]
    number = np.full(links.n_rows, -1)
    number[rows] = np.arange(len(rows))
    start = np.zeros(len(rows) + 1, np.int64)
    np.cumsum(np.bincount(position[same], minlength=len(rows)), out=start[1:])
    ends = number[other[same]]
    graph = csr_array((np.ones(len(ends)), ends, start), shape=(len(rows), len(rows)))
    part = connected_components(graph, directed=False)[1]
    first = np.full(int(part.max()) + 1, links.n_rows)
    np.minimum.at(first, part, rows)
    root[rows] = np.where(np.bincount(part)[part] >= 2, first[part], -1)
    return root


def _number_roots(root: Integers) -> Integers:
    label = np.full(len(root), -1, np.int64)
    used = root >= 0
    label[used] = np.unique(root[used], return_inverse=True)[1]
    return label


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
    return _number_roots(_split_roots(links, np.flatnonzero(label >= 0), label))


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
    return _sum_members(field, rows, label[rows])


def _sum_members(field: Field, rows: Integers, unit: Integers) -> Profiles:
    n_units = int(unit.max(initial=-1)) + 1
    weight = field.weight[rows]
    return Profiles(
        weight=_sum_by(unit, weight, n_units),
        push=_sum_by(unit, weight * field.value[rows], n_units),
    )


def _sum_by(unit: Integers, values: Floats, n_units: int) -> Floats:
    columns = [np.bincount(unit, column, minlength=n_units) for column in values.T]
    return np.stack(columns, axis=1) if columns else np.zeros((n_units, 0))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Belonging:
    """What speaks for sites to belong to units.

    Attributes
    ----------
    gain : ndarray of float, shape (n_pairs,)
        Log-likelihood gained when the site belongs to the unit.
    misfit : ndarray of float, shape (n_pairs,)
        How unlike the unit's profile the site is, to be held against chi-square.
    """

    gain: Floats
    misfit: Floats


def weigh_belonging(
    field: Field,
    profiles: Profiles,
    *,
    site: Integers,
    unit: Integers,
    inside: Booleans,
) -> Belonging:
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
    Belonging
        Gains and misfits.
    """
    if field.weight.shape[1] == 1 and field.power.max(initial=0) < MOST_POWER:
        return _weigh_whole(field, profiles, site=site, unit=unit, inside=inside)
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
    spread = _sum_columns(mean * mean, precision)
    rest = _sum_columns(value * value, weight * known)
    charge = _charge(np.log1p(relative), field.freedom[site])
    charge = charge + np.log1p(AMPLITUDE_SCATTER**2 * spread)
    return Belonging(gain=0.5 * (rest - misfit - charge), misfit=misfit)


def _weigh_whole(
    field: Field,
    profiles: Profiles,
    *,
    site: Integers,
    unit: Integers,
    inside: Booleans,
) -> Belonging:
    """Weigh rows without gaps, through products of site and profile alone."""
    weight = field.weight[site, 0]
    own = weight * inside
    total = profiles.weight[unit, 0] - own
    known = total > 1e-9 * weight
    safe = np.where(known, total, 1.0)
    squares = field.power[site] / weight
    push_squares = np.einsum("ij,ij->i", profiles.push, profiles.push)[unit]
    product = np.einsum("ij,ij->i", field.value[site], profiles.push[unit])
    to_mean = np.where(known, (product - own * squares) / safe, 0.0)
    rest = push_squares - 2 * own * product + own**2 * squares
    mean_squares = np.where(known, np.maximum(rest, 0.0) / safe**2, 0.0)
    relative = np.where(known, weight / safe, 0.0)
    precision = np.where(known, weight / (1 + relative), 0.0)
    scatter = AMPLITUDE_SCATTER**2
    apart = np.maximum(squares - 2 * to_mean + mean_squares, 0.0)
    spread = 1 + scatter * precision * mean_squares
    along = precision * (to_mean - mean_squares)
    misfit = np.maximum(precision * apart - scatter * along**2 / spread, 0.0)
    charge = field.freedom[site] * np.log1p(relative) + np.log(spread)
    gain = 0.5 * (weight * known * squares - misfit - charge)
    return Belonging(gain=gain, misfit=misfit)


def _sum_columns(squares: Floats, weight: Floats) -> Floats:
    """Sum weighted squares over the columns; one weight may serve all columns."""
    if weight.shape[1] == 1:
        plain: Floats = squares.sum(1) * weight[:, 0]
        return plain
    each: Floats = squares * weight
    total: Floats = each.sum(1)
    return total


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
    found = weigh_belonging(
        field,
        sum_profiles(field, label),
        site=rows,
        unit=unit,
        inside=np.ones(len(rows), bool),
    )
    position, other = spread_neighbours(links, rows)
    inner = label[other] == unit[position]
    edges = np.bincount(unit[position[inner]], minlength=n_units) / 2
    price = MEMBER_PRICE * np.bincount(unit, minlength=n_units)
    plain = np.bincount(unit, found.gain, minlength=n_units)
    excess = np.maximum(0.0, found.misfit - field.freedom[rows]) / 2
    capped: Floats = np.bincount(
        unit,
        np.minimum(found.gain, GAIN_CAP) - MISFIT_CHARGE * excess,
        minlength=n_units,
    ).astype(np.float64)
    first_row = np.full(n_units, links.n_rows)
    np.minimum.at(first_row, unit, rows)
    return Grouping(
        label=label,
        energy=plain - price + EDGE_WORTH * links.factor * edges,
        capped_energy=capped - price + COMPACT_EDGE_WORTH * links.factor * edges,
        first_row=first_row,
    )
