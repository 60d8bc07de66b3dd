"""The baseline at a site, told by sites apart from it.

A polynomial over the fold bends towards the few sites at its ends. Mobile ends of a
chain would draw the trend to themselves and then look quiet. So the trend at a site is
predicted from the sites that are not near it in the contact graph, and the variance of
that prediction is added to the error of the site.
"""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from structmap.motional_units.field import Booleans, Floats, Links

RIDGE = 1e-8


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Prediction:
    """Baselines told from apart, of some samples.

    Attributes
    ----------
    value : ndarray of float, shape (n_samples, n_rows, n_columns)
        The baseline at each row.
    variance : ndarray of float, shape (n_samples, n_rows)
        Variance of the prediction, in units of the squared errors.
    """

    value: Floats
    variance: Floats


def find_near(links: Links, steps: int) -> csr_array:
    """Return which rows are near each other: each row itself, and over some contacts.

    Parameters
    ----------
    links : Links
        Who touches whom, of one sample.
    steps : int
        Contacts on the way, 1 or 2.

    Returns
    -------
    csr_array, shape (n_rows, n_rows)
        1 where near.
    """
    own = np.arange(links.n_rows)
    rows = np.concatenate([links.first, links.second, own])
    columns = np.concatenate([links.second, links.first, own])
    shape = (links.n_rows, links.n_rows)
    touching = csr_array((np.ones(len(rows)), (rows, columns)), shape=shape)
    near = touching
    for _ in range(steps - 1):
        near = csr_array(near @ touching)
    near.data[:] = 1.0
    return near


def predict_apart(
    value: Floats,
    weight: Floats,
    basis: Floats,
    *,
    near: csr_array,
    seen: Booleans | None,
) -> Prediction:
    """Predict a weighted trend at each row from the rows that are not near it.

    Least squares with a block of rows left out (Cook and Weisberg, Residuals and
    Influence in Regression, 1982, from memory), by taking the block off the normal
    equations.

    Parameters
    ----------
    value : ndarray of float, shape (n_samples, n_rows, n_columns)
        Values.
    weight : ndarray of float, shape (n_samples, n_rows)
        Weights of the rows in the trend.
    basis : ndarray of float, shape (n_rows, n_terms)
        Terms of the trend.
    near : csr_array, shape (n_rows, n_rows)
        1 where two rows are near, the diagonal included.
    seen : ndarray of bool, shape (n_rows, n_columns), or None
        False where missing; None when nothing is missing.

    Returns
    -------
    Prediction
        Where the rows apart do not tell the trend, the variance is large. With missing
        values the largest variance over the columns.
    """
    if seen is None:
        return _predict(value, weight, basis, near)
    parts = [
        _predict(value[:, :, k : k + 1], weight * seen[:, k], basis, near)
        for k in range(value.shape[2])
    ]
    return Prediction(
        value=np.concatenate([part.value for part in parts], axis=2),
        variance=np.max([part.variance for part in parts], axis=0),
    )


def _predict(
    value: Floats, weight: Floats, basis: Floats, near: csr_array
) -> Prediction:
    n_rows, n_terms = basis.shape
    squares = (basis[:, :, None] * basis[:, None, :]).reshape(n_rows, -1)
    told, variance = np.empty_like(value), np.empty_like(weight)
    for sample, given in enumerate(weight):
        normal = _rest(given[:, None] * squares, near).reshape(-1, n_terms, n_terms)
        pushes = (given[:, None] * basis)[:, :, None] * value[sample][:, None, :]
        right = _rest(pushes.reshape(n_rows, -1), near).reshape(n_rows, n_terms, -1)
        size = np.trace(normal, axis1=1, axis2=2).max() + 1e-300
        normal = normal + RIDGE * size * np.eye(n_terms)
        solved = np.linalg.solve(
            normal, np.concatenate([right, basis[:, :, None]], axis=2)
        )
        projected = np.einsum("np,npk->nk", basis, solved)
        told[sample], variance[sample] = projected[:, :-1], projected[:, -1]
    return Prediction(value=told, variance=np.maximum(variance, 0.0))


def _rest(terms: Floats, near: csr_array) -> Floats:
    """Return for each row the sum over the rows that are not near it."""
    out: Floats = terms.sum(0) - near @ terms
    return out
