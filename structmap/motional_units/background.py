"""The molecule's baseline: one value for all, or a smooth trend over the fold."""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import qr
from scipy.sparse import csr_array
from scipy.special import gammaincinv

from structmap.motional_units.apart import predict_apart
from structmap.motional_units.field import Booleans, Floats, Integers

# 1 over the third quartile of the normal distribution: makes a median of absolute
# values an estimate of the standard deviation.
MEDIAN_TO_DEVIATION = 1.4826
SITES_PER_TERM = 5
HUBER_STEPS, STEPS = 8, 20
HUBER_BEND, TUKEY_END = 0.6, 1.6
HIGHEST_DEGREE = 3


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Samples:
    """Values of the same sites, measured once or redrawn many times.

    Attributes
    ----------
    value : ndarray of float, shape (n_samples, n_rows, n_columns)
        Each column over the median error of the column; 0 where missing.
    error : ndarray of float, shape (n_rows,)
        Error of each row, in the same scale, not yet corrected.
    seen : ndarray of bool, shape (n_rows, n_columns), or None
        False where missing; None when nothing is missing.
    lost : int
        Degrees of freedom taken by baselines of the rows.
    is_profile : bool
        Whether the columns are points of one profile.
    """

    value: Floats
    error: Floats
    seen: Booleans | None
    lost: int
    is_profile: bool = True

    def freedom(self) -> Integers:
        """Return the degrees of freedom of each row.

        Returns
        -------
        ndarray of int, shape (n_rows,)
            At least 1.
        """
        n_rows, n_columns = self.value.shape[1:]
        columns = np.full(n_rows, n_columns) if self.seen is None else self.seen.sum(1)
        out: Integers = np.maximum(columns - self.lost, 1)
        return out


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Background:
    """Baselines of some samples.

    Attributes
    ----------
    value : ndarray of float, shape (n_samples, n_rows, n_columns)
        The baseline at each row.
    scale : ndarray of float, shape (n_samples,)
        Factor by which errors must be multiplied to fit the scatter.
    error : ndarray of float, shape (n_samples, n_rows)
        Error of each row with that of its baseline, not yet multiplied.
    """

    value: Floats
    scale: Floats
    error: Floats


def trend_bases(centres: Floats) -> list[Floats]:
    """Return orthonormal terms of smooth trends over the fold, a set for each degree.

    Parameters
    ----------
    centres : ndarray of float, shape (n_rows, 3)
        Positions in Å.

    Returns
    -------
    list of ndarray of float, shape (n_rows, n_terms)
        For degrees 0 to 3, as far as there are five sites for each term. Positions are
        rotated to principal axes and scaled to unit deviation first.
    """
    n_rows = len(centres)
    bases = [np.ones((n_rows, 1)) / np.sqrt(max(n_rows, 1))]
    axes = _principal_axes(centres)
    terms = [np.ones(n_rows)]
    last: dict[tuple[int, ...], Floats] = {(): np.ones(n_rows)}
    for _ in range(HIGHEST_DEGREE):
        last = {
            (*word, axis): product * axes[:, axis]
            for word, product in last.items()
            for axis in range(word[-1] if word else 0, axes.shape[1])
        }
        terms += [product - product.mean() for product in last.values()]
        if n_rows < SITES_PER_TERM * len(terms):
            break
        basis = _orthonormal(np.stack(terms, axis=1))
        if basis.shape[1] > bases[-1].shape[1]:
            bases.append(basis)
    return bases


def _principal_axes(centres: Floats) -> Floats:
    if len(centres) < 2:
        return np.zeros((len(centres), 0))
    about = centres - centres.mean(0)
    along = about @ np.linalg.svd(about, full_matrices=False)[2].T
    spread = along.std(0)
    wide = spread > 1e-6 * max(float(spread.max(initial=0)), 1e-6)
    out: Floats = along[:, wide] / spread[wide]
    return out


def _orthonormal(terms: Floats) -> Floats:
    basis, upper, _ = qr(terms, mode="economic", pivoting=True)
    size = np.abs(np.diag(upper))
    out: Floats = basis[:, size > 1e-8 * size[0]]
    return out


def fit_background(
    samples: Samples,
    resting: Booleans,
    basis: Floats,
    *,
    near: csr_array | None = None,
) -> Background:
    """Fit the baseline robustly to the rows at rest and estimate the error scale.

    Without a trend the median of each column, else iterated weighted least squares
    with weights that first bend (Huber) and then end (Tukey); where `near` is given the
    trend at each row is then told from the rows apart from it.

    Parameters
    ----------
    samples : Samples
        Values.
    resting : ndarray of bool, shape (n_samples, n_rows)
        Rows that the baseline is fitted to.
    basis : ndarray of float, shape (n_rows, n_terms)
        Terms of the trend; one constant term for none, no term when the baseline is
        known and already taken off.
    near : csr_array, shape (n_rows, n_rows), optional
        Which rows are near each other.

    Returns
    -------
    Background
        Baselines and scales.

    References
    ----------
    .. [1] Huber, Ann. Math. Stat. 35, 73-101 (1964).
    .. [2] Beaton and Tukey, Technometrics 16, 147-185 (1974).
    """
    error = np.broadcast_to(samples.error, resting.shape)
    if not basis.shape[1]:
        nothing = np.zeros_like(samples.value)
        scale = _scale(samples, resting, nothing)
        return Background(value=nothing, scale=scale, error=error)
    centre = masked_median(samples.value, _use(samples, resting))
    value = np.broadcast_to(centre[:, None, :], samples.value.shape)
    if basis.shape[1] == 1:
        scale = _scale(samples, resting, value)
        return Background(value=value, scale=scale, error=error)
    weight, value = _iterate(samples, resting, basis, value)
    m = resting.sum(1)
    shrink = np.sqrt(m / np.maximum(m - basis.shape[1], 1))
    if near is None:
        scale = _scale(samples, resting, value) * shrink
        return Background(value=value, scale=scale, error=error)
    told = predict_apart(samples.value, weight, basis, near=near, seen=samples.seen)
    return Background(
        value=told.value,
        scale=_scale(samples, resting, value) * shrink,
        error=np.sqrt(error**2 + told.variance),
    )


def _use(samples: Samples, resting: Booleans) -> Booleans:
    if samples.seen is None:
        return np.broadcast_to(resting[:, :, None], samples.value.shape)
    return resting[:, :, None] & samples.seen


def masked_median(values: Floats, use: Booleans) -> Floats:
    """Return medians over the second axis of the entries in use.

    Parameters
    ----------
    values : ndarray of float, shape (n_samples, n_rows, ...)
        Values.
    use : ndarray of bool, same shape
        Entries to take.

    Returns
    -------
    ndarray of float, shape (n_samples, ...)
        Medians; 0 where no entry is in use.
    """
    ordered = np.sort(np.where(use, values, np.inf), axis=1)
    count = use.sum(axis=1)[:, None]
    low = np.take_along_axis(ordered, np.maximum((count - 1) // 2, 0), axis=1)
    high = np.take_along_axis(
        ordered, np.minimum(count // 2, values.shape[1] - 1), axis=1
    )
    out: Floats = np.where(count > 0, (low + high) / 2, 0.0)[:, 0]
    return out


def _iterate(
    samples: Samples, resting: Booleans, basis: Floats, value: Floats
) -> tuple[Floats, Floats]:
    """Return the weights of the last step and the trend that they gave."""
    freedom = samples.freedom()
    # Quantiles of chi-square.
    middle = np.sqrt(2 * gammaincinv(freedom / 2, 0.5))
    far = np.sqrt(2 * gammaincinv(freedom / 2, 0.99))
    for step in range(STEPS):
        length = _lengths(samples, value)
        unit = masked_median(length / middle, resting)
        ratio = length / (np.maximum(unit, 1e-12)[:, None] * far)
        if step < HUBER_STEPS:
            damp = np.minimum(1.0, HUBER_BEND / np.maximum(ratio, 1e-12))
        else:
            damp = np.maximum(0.0, 1 - (ratio / TUKEY_END) ** 2) ** 2
        weight = damp * resting / samples.error**2
        value = basis @ _solve(samples, weight, basis)
    return weight, value


def _lengths(samples: Samples, value: Floats) -> Floats:
    off = samples.value - value
    if samples.seen is not None:
        off = off * samples.seen
    out: Floats = np.sqrt(np.einsum("rnk,rnk->rn", off, off)) / samples.error
    return out


def _solve(samples: Samples, weight: Floats, basis: Floats) -> Floats:
    """Weighted least squares of every column; one system when nothing is missing."""
    if samples.seen is None:
        return _solve_columns(samples.value, weight, basis)
    columns = [
        _solve_columns(
            samples.value[:, :, k : k + 1], weight * samples.seen[:, k], basis
        )
        for k in range(samples.value.shape[2])
    ]
    return np.concatenate(columns, axis=2)


def _solve_columns(value: Floats, weight: Floats, basis: Floats) -> Floats:
    weighted = basis.T[None] * weight[:, None, :]
    normal = weighted @ basis
    # A trace of ridge keeps the system solvable when few rows carry weight.
    ridge = 1e-10 * np.trace(normal, axis1=1, axis2=2) + 1e-300
    normal = normal + ridge[:, None, None] * np.eye(basis.shape[1])
    out: Floats = np.linalg.solve(normal, weighted @ value)
    return out


def _scale(samples: Samples, resting: Booleans, value: Floats) -> Floats:
    """Take the median size, or the mean where over half sit on the baseline."""
    n_samples = len(value)
    size = np.abs(samples.value - value) / samples.error[:, None]
    use = _use(samples, resting)
    flat, used = size.reshape(n_samples, -1), use.reshape(n_samples, -1)
    scale = MEDIAN_TO_DEVIATION * masked_median(flat, used)
    mean = (flat * used).sum(1) / np.maximum(used.sum(1), 1) * np.sqrt(np.pi / 2)
    columns = samples.value.shape[2]
    shrink = np.sqrt(columns / max(columns - samples.lost, 1))
    out: Floats = (
        np.where(scale > 1e-12 * np.maximum(mean, 1e-300), scale, mean) * shrink
    )
    return out
