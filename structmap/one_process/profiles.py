"""The profiles of a group of sites, and what a fit of them found."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import fdtri, gammaincinv

from structmap.one_process.model import FloatArray, Model
from structmap.records import store_read_only

FLAT_QUANTILE = 0.99
STATED_LIMIT = 3.841458820694124
"""95 % point of chi-square with one degree of freedom."""
_CONFIDENCE = 0.95


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Profiles:
    """Profiles of several sites at common points.

    Attributes
    ----------
    name : tuple of str
        The sites.
    x : ndarray of float, shape (n_points,)
        In the base unit of the model, any order.
    value, error : ndarray of float, shape (n_sites, n_points)
        Standard errors are above 0; a missing point has NaN as its value.
    block : ndarray of int, shape (n_points,)
        Points of one block have a baseline in common; the default is one block.
    """

    name: tuple[str, ...]
    x: NDArray[np.float64]
    value: NDArray[np.float64]
    error: NDArray[np.float64]
    block: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))

    def __post_init__(self) -> None:
        store_read_only(self, "x", np.float64, (None,))
        if not len(self.block):
            object.__setattr__(self, "block", np.zeros(len(self.x), dtype=np.int64))
        store_read_only(self, "block", np.int64, (len(self.x),))
        store_read_only(self, "value", np.float64, (len(self.name), len(self.x)))
        store_read_only(self, "error", np.float64, self.value.shape)
        if not np.all(np.isfinite(self.x)):
            raise ValueError("x holds a value that is not finite")
        refused = self.error[self.present & ~(self.error > 0)]
        if refused.size:
            raise ValueError(f"error holds {refused[0]}; it must be above 0")

    @property
    def present(self) -> NDArray[np.bool_]:
        """Return which points a site has, shape (n_sites, n_points).

        Returns
        -------
        ndarray of bool
            Which points a site has, shape (n_sites, n_points).
        """
        return np.isfinite(self.value)

    @property
    def root_weight(self) -> FloatArray:
        """Return one over the error, 0 where missing, shape (n_sites, n_points).

        Returns
        -------
        ndarray of float
            One over the error, 0 where missing, shape (n_sites, n_points).
        """
        out = np.zeros(self.value.shape)
        np.divide(1.0, self.error, out=out, where=self.present)
        return out

    @property
    def filled(self) -> FloatArray:
        """Return the values with 0 where missing, shape (n_sites, n_points).

        Returns
        -------
        ndarray of float
            The values with 0 where missing, shape (n_sites, n_points).
        """
        return np.where(self.present, self.value, 0.0)

    def take(self, sites: ArrayLike) -> "Profiles":
        """Return the profiles of some sites.

        Parameters
        ----------
        sites : array_like of int or bool
            Indices, or a mask over the sites.

        Returns
        -------
        Profiles
            In the order given.
        """
        index = np.arange(len(self.name))[np.asarray(sites)]
        return Profiles(
            name=tuple(self.name[i] for i in index),
            x=self.x,
            value=self.value[index],
            error=self.error[index],
            block=self.block,
        )

    def take_points(self, keep: NDArray[np.bool_]) -> "Profiles":
        """Return the profiles at some of the points.

        Parameters
        ----------
        keep : ndarray of bool, shape (n_points,)
            Points to keep.

        Returns
        -------
        Profiles
            With fewer points.
        """
        return Profiles(
            name=self.name,
            x=self.x[keep],
            value=self.value[:, keep],
            error=self.error[:, keep],
            block=self.block[keep],
        )


def make_profiles(
    x: ArrayLike, values: ArrayLike, errors: ArrayLike, *, name: tuple[str, ...] = ()
) -> Profiles:
    """Return profiles from plain arrays.

    Parameters
    ----------
    x : array_like, shape (n_points,)
        In the base unit of the model.
    values : array_like, shape (n_sites, n_points) or (n_points,)
        NaN where missing.
    errors : array_like
        Standard errors, broadcast against the values.
    name : tuple of str, optional
        Names of the sites; the default numbers them from 1.

    Returns
    -------
    Profiles
        Checked and read-only.

    Raises
    ------
    ValueError
        If shapes do not fit, x is not finite or an error is not above 0.
    """
    value = np.atleast_2d(np.asarray(values, dtype=np.float64))
    error = np.broadcast_to(np.asarray(errors, dtype=np.float64), value.shape)
    names = name or tuple(str(number) for number in range(1, len(value) + 1))
    return Profiles(
        name=names, x=np.asarray(x, dtype=np.float64), value=value, error=error
    )


def find_flat_sites(profiles: Profiles) -> NDArray[np.bool_]:
    """Say which profiles a constant explains, so that they tell nothing of a process.

    Parameters
    ----------
    profiles : Profiles
        Of any number of sites.

    Returns
    -------
    ndarray of bool, shape (n_sites,)
        True where chi-square about the weighted mean, that of each block, is below the
        99 % point.
    """
    weight, present = profiles.root_weight**2, profiles.present
    misfit = np.zeros(len(weight))
    freedom = present.sum(axis=1)
    for block in np.unique(profiles.block):
        part = weight * (profiles.block == block)
        total = part.sum(axis=1)
        mean = np.divide(
            (part * profiles.filled).sum(axis=1),
            total,
            out=np.zeros(len(total)),
            where=total > 0,
        )
        misfit += (part * (profiles.filled - mean[:, None]) ** 2).sum(axis=1)
        freedom = freedom - (total > 0)
    freedom = np.maximum(freedom, 1)
    return np.asarray(misfit < 2 * gammaincinv(freedom / 2, FLAT_QUANTILE))


def interval_rise(chi2: float, freedom: int) -> float:
    """Return how far misfit may rise above its lowest within an interval of 95 %.

    Parameters
    ----------
    chi2 : float
        Lowest misfit.
    freedom : int
        Its degrees of freedom; with none the errors are taken as stated.

    Returns
    -------
    float
        The error scale, `chi2` over `freedom`, times the 95 % point of F with 1 and
        `freedom` degrees of freedom.
    """
    if freedom < 1:
        return STATED_LIMIT
    return max(float(fdtri(1, freedom, _CONFIDENCE)) * (chi2 / freedom), 1e-9)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class GroupFit:
    """One shared value, and a value for each site, fitted to a group.

    Attributes
    ----------
    model : Model
    profiles : Profiles
        What was fitted.
    shared : float
        The shared value, in the unit of the model's parameter; NaN where the lowest
        misfit lies on an end of the range searched.
    best : float
        Where the misfit is lowest, also on an end.
    low, high : float
        Interval of 95 % that takes the error scale from the scatter; NaN at an end
        that the data leave open.
    low_stated, high_stated : float
        The same with the errors as stated.
    companion : float
        The second shared value; NaN for models without.
    chi2_shared, chi2_free : float
        Misfit with one value, and with one for each site.
    free : ndarray of float, shape (n_sites,)
        Values of the sites alone; NaN on an end of the range.
    free_low, free_high : ndarray of float, shape (n_sites,)
        Their intervals by the stated errors; NaN at an open end.
    grid : ndarray of float, shape (n_nodes,)
        Values of the shared parameter.
    grid_chi2 : ndarray of float, shape (n_sites, n_nodes)
        Misfit of each site over them, for the plot; companions are at their best.
    grid_shared : ndarray of float, shape (n_nodes,)
        Misfit of all sites together over them: with one companion for all, so that it
        can lie above the sum over the sites.
    baseline, amplitude, local : ndarray of float, shape (n_sites,)
        Of the shared fit; `local` is NaN for models without, `baseline` that of the
        first block of points.
    fitted, residual, leverage : ndarray of float, shape (n_sites, n_points)
        Of the shared fit; residuals are values less fitted ones, NaN where missing.
    curve_x : ndarray of float, shape (n_curve,)
        A fine grid of x.
    curve, curve_error : ndarray of float, shape (n_sites, n_curve)
        Fitted curves with standard errors from the scatter.
    """

    model: Model
    profiles: Profiles
    shared: float
    best: float
    low: float
    high: float
    low_stated: float
    high_stated: float
    companion: float
    chi2_shared: float
    chi2_free: float
    free: NDArray[np.float64]
    free_low: NDArray[np.float64]
    free_high: NDArray[np.float64]
    grid: NDArray[np.float64]
    grid_chi2: NDArray[np.float64]
    grid_shared: NDArray[np.float64]
    baseline: NDArray[np.float64]
    amplitude: NDArray[np.float64]
    local: NDArray[np.float64]
    fitted: NDArray[np.float64]
    residual: NDArray[np.float64]
    leverage: NDArray[np.float64]
    curve_x: NDArray[np.float64]
    curve: NDArray[np.float64]
    curve_error: NDArray[np.float64]

    def __post_init__(self) -> None:
        n_sites, n_points = self.profiles.value.shape
        store_read_only(self, "grid", np.float64, (None,))
        store_read_only(self, "curve_x", np.float64, (None,))
        for name in ("free", "free_low", "free_high", "baseline", "amplitude", "local"):
            store_read_only(self, name, np.float64, (n_sites,))
        for name in ("fitted", "residual", "leverage"):
            store_read_only(self, name, np.float64, (n_sites, n_points))
        store_read_only(self, "grid_chi2", np.float64, (n_sites, len(self.grid)))
        store_read_only(self, "grid_shared", np.float64, self.grid.shape)
        for name in ("curve", "curve_error"):
            store_read_only(self, name, np.float64, (n_sites, len(self.curve_x)))

    @property
    def freedom_shared(self) -> int:
        """Return degrees of freedom of the shared fit.

        Returns
        -------
        int
            Degrees of freedom of the shared fit.
        """
        model, n_sites = self.model, len(self.profiles.name)
        points = int(self.profiles.present.sum())
        return points - model.n_own * n_sites - model.n_shared

    @property
    def freedom_free(self) -> int:
        """Return degrees of freedom of the fits of the sites alone.

        Returns
        -------
        int
            Degrees of freedom of the fits of the sites alone.
        """
        model, n_sites = self.model, len(self.profiles.name)
        points = int(self.profiles.present.sum())
        return points - (model.n_own + model.n_shared) * n_sites

    @property
    def freedom_between(self) -> int:
        """Return parameters that the sites alone have more than the shared fit.

        Returns
        -------
        int
            Parameters that the sites alone have more than the shared fit.
        """
        return self.model.n_shared * (len(self.profiles.name) - 1)

    @property
    def interval_limit(self) -> float:
        """Return the misfit at the ends of the interval `low` to `high`.

        Returns
        -------
        float
            The misfit at the ends of the interval `low` to `high`.
        """
        return self.chi2_shared + interval_rise(self.chi2_shared, self.freedom_shared)

    @property
    def band(self) -> FloatArray:
        """Return half the width of the 95 % band at each point of the curves.

        Returns
        -------
        ndarray of float
            Half the width of the 95 % band at each point of the curves: the standard
            error times the root of the quantile that makes the interval.
        """
        freedom = self.freedom_shared
        width = STATED_LIMIT if freedom < 1 else float(fdtri(1, freedom, _CONFIDENCE))
        return np.asarray(np.sqrt(width) * self.curve_error)

    @property
    def f_statistic(self) -> float:
        """Return growth of the misfit by sharing over the scatter; NaN without freedom.

        Returns
        -------
        float
            Growth of the misfit by sharing over the scatter; NaN without freedom.
        """
        if self.freedom_free < 1 or self.freedom_between < 1 or self.chi2_free <= 0:
            return float("nan")
        growth = max(self.chi2_shared - self.chi2_free, 0.0) / self.freedom_between
        return growth / (self.chi2_free / self.freedom_free)

    @property
    def error_scale(self) -> float:
        """Return scatter about the fits of the sites alone, in squared stated errors.

        Returns
        -------
        float
            Scatter about the fits of the sites alone, in squared stated errors.
        """
        return self.chi2_free / self.freedom_free if self.freedom_free > 0 else np.nan
