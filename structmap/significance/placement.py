"""Searches in values that were put on random sites."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from structmap.motional_units.field import (
    Field,
    Floats,
    Integers,
    Links,
    take_rows,
    tile_links,
)
from structmap.motional_units.grouping import look_up_pairs, screen_all_pairs
from structmap.motional_units.refinement import Grouping, extend_pairs, find_groups

# Rows up to which all pairs are screened at once.
MOST_TABLED = 800


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Scores:
    """Statistics of searches, one a placement.

    Attributes
    ----------
    total, largest : ndarray of float, shape (n_orders,)
        Sum and maximum of the capped energies of the units found, those below 0 left
        out; 0 without any.
    """

    total: Floats
    largest: Floats


def order_scorer(field: Field, links: Links) -> Callable[[Integers], Scores]:
    """Return what scores placements of the rows of one field on one graph.

    Whether two rows deviate alike does not depend on where they sit, so all pairs are
    screened once, unless there are too many.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.

    Returns
    -------
    callable
        From placements, the row that comes to each place, shape (n_orders, n_rows), to
        the scores of the units found in each.
    """
    table = screen_all_pairs(field) if links.n_rows <= MOST_TABLED else None
    tiled = links

    def score(orders: Integers) -> Scores:
        nonlocal tiled
        n_orders = len(orders)
        if tiled.n_rows != n_orders * links.n_rows:
            tiled = tile_links(links, n_orders)
        placed = take_rows(field, orders.ravel())
        if table is None:
            return _score(find_groups(placed, tiled), *orders.shape)
        pairs = look_up_pairs(table, orders, tiled)
        return _score(extend_pairs(placed, tiled, pairs), *orders.shape)

    return score


def _score(group: Grouping, n_orders: int, n_rows: int) -> Scores:
    block = group.first_row // n_rows
    energy = np.maximum(group.capped_energy, 0.0)
    largest = np.zeros(n_orders)
    np.maximum.at(largest, block, energy)
    return Scores(
        total=np.bincount(block, energy, minlength=n_orders).astype(np.float64),
        largest=largest,
    )


def find_groups_of_orders(
    field: Field, links: Links, orders: Integers
) -> tuple[Integers, ...]:
    """Return the groups found in fields in which other rows sit at the places.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.
    orders : ndarray of int, shape (n_orders, n_rows)
        Row that comes to each place.

    Returns
    -------
    tuple of ndarray of int
        Rows of each group, of all placements.
    """
    flat = orders.ravel()
    label = find_groups(take_rows(field, flat), tile_links(links, len(orders))).label
    inside = np.flatnonzero(label >= 0)
    inside = inside[np.argsort(label[inside], kind="stable")]
    ends = np.flatnonzero(np.diff(label[inside])) + 1
    return tuple(flat[one] for one in np.split(inside, ends) if len(one))


def random_orders(n_rows: int, rng: np.random.Generator) -> Callable[[int], Integers]:
    """Return a source of random permutations.

    Parameters
    ----------
    n_rows : int
        Rows to permute.
    rng : numpy.random.Generator
        Where chance comes from.

    Returns
    -------
    callable
        Gives that many permutations, shape (n_orders, n_rows).
    """

    def draw(n_orders: int) -> Integers:
        rows = np.broadcast_to(np.arange(n_rows), (n_orders, n_rows))
        return rng.permuted(rows, axis=1)

    return draw
