"""Placements that keep the spatial autocorrelation of the measured values."""

from collections.abc import Callable

import numpy as np
from scipy.sparse import csr_array, diags_array, eye_array

from structmap.motional_units.field import Field, Floats, Integers, Links
from structmap.significance.autocorrelation import adjacency, morans_i, normal_scores

SHARES = np.linspace(0, 1, 11)
TRIALS = 12


def smooth_orders(
    field: Field, links: Links, profile: Floats, rng: np.random.Generator
) -> Callable[[int], Integers]:
    """Return a source of placements as smooth as the data along a profile.

    Random fields are mixed from white noise and noise averaged twice over neighbours,
    in the share that gives normal scores the same Moran's I as those of the data along
    `profile`. The rows, ordered along the profile, are put where such a field has the
    same ranks.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.
    profile : ndarray of float, shape (n_columns,)
        Direction along which rows are ordered: the profile of a unit.
    rng : numpy.random.Generator
        Where chance comes from.

    Returns
    -------
    callable
        Gives that many placements, shape (n_orders, n_rows): the row at each place.
    """
    contacts = adjacency(links)
    height = field.value @ profile / np.sqrt(field.variance)
    by_height = np.argsort(height, kind="stable")
    smoother = _smoother(contacts)
    target = float(morans_i(normal_scores(height), contacts))
    share = _matching_share(smoother, contacts, target, rng)

    def draw(n_orders: int) -> Integers:
        fields = _random_fields(smoother, share, n_orders, rng)
        orders = np.empty((n_orders, len(height)), np.int64)
        places = np.argsort(fields.T, axis=1, kind="stable")
        np.put_along_axis(orders, places, by_height[None], axis=1)
        return orders

    return draw


def _smoother(contacts: csr_array) -> csr_array:
    """Average twice over a row and its neighbours; rows scaled to unit length."""
    step = contacts + eye_array(contacts.shape[0])
    step = diags_array(1 / np.asarray(step.sum(1))) @ step
    twice = csr_array(step @ step)
    length = np.sqrt(np.asarray(twice.multiply(twice).sum(1)))
    return csr_array(diags_array(1 / length) @ twice)


def _random_fields(
    smoother: csr_array, share: float, n_fields: int, rng: np.random.Generator
) -> Floats:
    smooth = smoother @ rng.standard_normal((smoother.shape[0], n_fields))
    white = rng.standard_normal((smoother.shape[0], n_fields))
    out: Floats = np.sqrt(share) * smooth + np.sqrt(1 - share) * white
    return out


def _matching_share(
    smoother: csr_array, contacts: csr_array, target: float, rng: np.random.Generator
) -> float:
    """Return the share of the smooth part that reaches the autocorrelation wanted."""
    means = np.array(
        [
            morans_i(
                normal_scores(_random_fields(smoother, share, TRIALS, rng)), contacts
            ).mean()
            for share in SHARES
        ]
    )
    if target <= means[0]:
        return 0.0
    above = np.flatnonzero(means >= target)
    if not len(above):
        return 1.0
    high = int(above[0])
    low = high - 1
    return float(np.interp(target, means[[low, high]], SHARES[[low, high]]))
