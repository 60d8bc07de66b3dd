"""What the search works on: deviations with their weights, and who touches whom.

Several problems over the same sites (permutations, redrawn errors) are laid side by
side as one problem with more rows, so that each step of the search runs over all of
them in a few calls of numpy.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Booleans = NDArray[np.bool_]

# Mean degree of protein contact graphs at 4.5 Å, to which the price of an edge refers.
USUAL_DEGREE = 8.7
FACTOR_RANGE = (0.3, 1.1)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Links:
    """Who touches whom, over rows.

    Attributes
    ----------
    n_rows : int
        Number of rows.
    first, second : ndarray of int, shape (n_edges,)
        Pairs with ``first < second``, each once, sorted.
    start : ndarray of int, shape (n_rows + 1,)
        Where the neighbours of each row begin in `neighbour`.
    neighbour : ndarray of int, shape (2 * n_edges,)
        Neighbours of all rows, one row after the other.
    factor : float
        What the worth of an edge is multiplied by, so that a wider cutoff, which makes
        more edges, does not make larger units.
    n_copy : int
        Rows of one of the copies laid side by side; no edge joins two copies.
    """

    n_rows: int
    first: Integers
    second: Integers
    start: Integers
    neighbour: Integers
    factor: float
    n_copy: int


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Field:
    """Deviations from the background and their weights.

    Attributes
    ----------
    value : ndarray of float, shape (n_rows, n_columns)
        Deviations; 0 where a column is missing.
    variance : ndarray of float, shape (n_rows,)
        Squared error of each row, the same for its columns.
    weight : ndarray of float, shape (n_rows, 1) or (n_rows, n_columns)
        Inverse variance; one column when nothing is missing, else 0 where missing.
    freedom : ndarray of int, shape (n_rows,)
        Degrees of freedom of a row.
    power : ndarray of float, shape (n_rows,)
        Sum of the squared deviations over the variance.
    direction : int
        1 or -1 when only units that deviate upwards or downwards count, else 0.
    """

    value: Floats
    variance: Floats
    weight: Floats
    freedom: Integers
    power: Floats
    direction: int


def make_links(n_rows: int, first: Integers, second: Integers) -> Links:
    """Return the neighbour lists of a set of edges.

    Parameters
    ----------
    n_rows : int
        Number of rows.
    first, second : ndarray of int, shape (n_edges,)
        Ends of the edges, each edge once, in any order.

    Returns
    -------
    Links
        With the factor of its own mean degree.
    """
    low, high = np.minimum(first, second), np.maximum(first, second)
    order = np.lexsort((high, low))
    low, high = low[order], high[order]
    both, other = np.concatenate([low, high]), np.concatenate([high, low])
    order = np.lexsort((other, both))
    start = np.zeros(n_rows + 1, np.int64)
    np.cumsum(np.bincount(both, minlength=n_rows), out=start[1:])
    degree = 2 * len(low) / max(n_rows, 1)
    factor = float(np.clip(USUAL_DEGREE / max(degree, 1e-9), *FACTOR_RANGE))
    return Links(
        n_rows=n_rows,
        first=low,
        second=high,
        start=start,
        neighbour=other[order],
        factor=factor,
        n_copy=n_rows,
    )


def restrict_links(links: Links, keep: Booleans) -> Links:
    """Return the links between the rows that are kept, with the factor unchanged.

    Parameters
    ----------
    links : Links
        Links over all rows.
    keep : ndarray of bool, shape (n_rows,)
        Rows to keep; they are numbered anew in the same order.

    Returns
    -------
    Links
        Over the kept rows.
    """
    number = np.cumsum(keep) - 1
    inside = keep[links.first] & keep[links.second]
    new = make_links(
        int(keep.sum()), number[links.first[inside]], number[links.second[inside]]
    )
    return replace(new, factor=links.factor)


def tile_links(links: Links, times: int) -> Links:
    """Return the links of `times` copies of the rows laid side by side.

    Parameters
    ----------
    links : Links
        Links of one copy.
    times : int
        Number of copies.

    Returns
    -------
    Links
        Over ``times * n_rows`` rows.
    """
    if times == 1:
        return links
    step = np.arange(times, dtype=np.int64)[:, None]
    start = (links.start[:-1] + step * len(links.neighbour)).ravel()
    return Links(
        n_rows=times * links.n_rows,
        first=(links.first + step * links.n_rows).ravel(),
        second=(links.second + step * links.n_rows).ravel(),
        start=np.append(start, times * len(links.neighbour)),
        neighbour=(links.neighbour + step * links.n_rows).ravel(),
        factor=links.factor,
        n_copy=links.n_rows,
    )


def spread_neighbours(links: Links, rows: Integers) -> tuple[Integers, Integers]:
    """Return the neighbours of some rows.

    Parameters
    ----------
    links : Links
        Who touches whom.
    rows : ndarray of int, shape (n_chosen,)
        Rows whose neighbours are wanted.

    Returns
    -------
    position : ndarray of int, shape (n_pairs,)
        Which of `rows` each neighbour belongs to.
    neighbour : ndarray of int, shape (n_pairs,)
        The neighbours.
    """
    begin = links.start[rows]
    count = links.start[rows + 1] - begin
    position = np.repeat(np.arange(len(rows)), count)
    within = np.arange(len(position)) - np.repeat(np.cumsum(count) - count, count)
    return position, links.neighbour[begin[position] + within]


def make_field(
    deviation: Floats,
    variance: Floats,
    *,
    seen: Booleans | None,
    lost: int = 0,
    direction: int = 0,
) -> Field:
    """Return deviations with their weights.

    Parameters
    ----------
    deviation : ndarray of float, shape (n_rows, n_columns)
        Values less background; anything where missing.
    variance : ndarray of float, shape (n_rows,)
        Squared errors.
    seen : ndarray of bool, shape (n_rows, n_columns), or None
        False where a column is missing; None when nothing is missing.
    lost : int
        Degrees of freedom that taking baselines off each row has cost.
    direction : int
        1 or -1 to let only units that deviate upwards or downwards count.

    Returns
    -------
    Field
        The same with powers and degrees of freedom.
    """
    weight = 1 / variance[:, None]
    columns = np.full(len(variance), deviation.shape[1], np.int64)
    if seen is not None:
        deviation = np.where(seen, deviation, 0.0)
        weight = weight * seen
        columns = seen.sum(1)
    return Field(
        value=deviation,
        variance=variance,
        weight=weight,
        freedom=np.maximum(columns - lost, 1),
        power=np.einsum("ij,ij->i", deviation, deviation) / variance,
        direction=direction,
    )


def take_rows(field: Field, rows: Integers) -> Field:
    """Return the field with other rows at its places.

    Parameters
    ----------
    field : Field
        Deviations and weights.
    rows : ndarray of int, shape (n_new,)
        Row that comes to each place; rows may repeat.

    Returns
    -------
    Field
        Of ``n_new`` rows.
    """
    return Field(
        value=field.value[rows],
        variance=field.variance[rows],
        weight=field.weight[rows],
        freedom=field.freedom[rows],
        power=field.power[rows],
        direction=field.direction,
    )


def chi2_limits(probability: float, highest: int) -> Floats:
    """Return quantiles of chi-square for 0 to `highest` degrees of freedom.

    Parameters
    ----------
    probability : float
        Probability below the quantile.
    highest : int
        Largest number of degrees of freedom.

    Returns
    -------
    ndarray of float, shape (highest + 1,)
        The quantiles; 0 for no degree of freedom.
    """
    out = np.zeros(highest + 1)
    out[1:] = 2 * gammaincinv(np.arange(1, highest + 1) / 2, probability)
    return out
