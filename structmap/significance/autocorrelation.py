"""Spatial autocorrelation over the contacts: Moran's I, join counts, local G."""

import numpy as np
import pandas as pd
from scipy.sparse import csr_array, eye_array
from scipy.special import ndtri

from structmap.motional_units.field import Floats, Links


def adjacency(links: Links) -> csr_array:
    """Return the contacts as a sparse 0/1 matrix.

    Parameters
    ----------
    links : Links
        Who touches whom.

    Returns
    -------
    scipy.sparse.csr_array, shape (n_rows, n_rows)
        Symmetric, with an empty diagonal.
    """
    ones = np.ones(len(links.neighbour))
    shape = (links.n_rows, links.n_rows)
    return csr_array((ones, links.neighbour, links.start), shape=shape)


def morans_i(values: Floats, contacts: csr_array) -> Floats:
    """Return Moran's I of one or several fields over the contacts.

    Parameters
    ----------
    values : ndarray of float, shape (n_rows,) or (n_rows, n_fields)
        The fields.
    contacts : scipy.sparse.csr_array, shape (n_rows, n_rows)
        0/1 adjacency.

    Returns
    -------
    ndarray of float, shape () or (n_fields,)
        ``(n / sum a) z'Az / z'z`` with z the deviations from the mean; 0 for a
        constant field or without contacts.

    References
    ----------
    .. [1] Moran, Biometrika 37, 17-23 (1950).
    """
    off = values - values.mean(0)
    along = (off * (contacts @ off)).sum(0)
    size = (off * off).sum(0) * contacts.sum()
    safe = np.where(size > 0, size, 1.0)
    out: Floats = np.where(size > 0, len(values) * along / safe, 0.0)
    return out


def getis_ord_star(values: Floats, contacts: csr_array) -> Floats:
    """Return the local statistic Gi* of each row: how high its surroundings are.

    Parameters
    ----------
    values : ndarray of float, shape (n_rows,)
        The field.
    contacts : scipy.sparse.csr_array, shape (n_rows, n_rows)
        0/1 adjacency; each row counts as its own neighbour besides.

    Returns
    -------
    ndarray of float, shape (n_rows,)
        Standard deviations above what random placement gives; NaN where a row
        touches all others or the field is constant.

    References
    ----------
    .. [1] Ord and Getis, Geogr. Anal. 27, 286-306 (1995).
    """
    n = len(values)
    with_self = contacts + eye_array(n)
    count = np.asarray(with_self.sum(1))
    mean = values.mean()
    deviation = np.sqrt(np.mean(values**2) - mean**2)
    spread = deviation * np.sqrt((n * count - count**2) / max(n - 1, 1))
    out: Floats = np.full(n, np.nan)
    good = spread > 0
    out[good] = ((with_self @ values - mean * count)[good]) / spread[good]
    return out


def join_count(marked: Floats, contacts: csr_array) -> float:
    """Return the number of contacts whose two ends are both marked.

    Parameters
    ----------
    marked : ndarray of float or bool, shape (n_rows,)
        1 where marked.
    contacts : scipy.sparse.csr_array, shape (n_rows, n_rows)
        0/1 adjacency.

    Returns
    -------
    float
        Joins, each counted once.

    References
    ----------
    .. [1] Cliff and Ord, Spatial Processes, Pion (1981); from memory.
    """
    ends = np.asarray(marked, np.float64)
    return float(ends @ (contacts @ ends)) / 2


def normal_scores(values: Floats) -> Floats:
    """Return the normal quantiles of the ranks within each field.

    Parameters
    ----------
    values : ndarray of float, shape (n_rows,) or (n_rows, n_fields)
        The fields.

    Returns
    -------
    ndarray of float, same shape
        ``quantile((rank - 1/2) / n)``; ties share their mean rank.
    """
    rank = pd.DataFrame(values).rank().to_numpy().reshape(values.shape)
    out: Floats = ndtri((rank - 0.5) / max(len(values), 1))
    return out
