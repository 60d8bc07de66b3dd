"""Replicates of a group under one shared value, and what the test could detect."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chndtr, fdtrc, ncfdtr

from structmap.one_process.engine import Solver, fitted_values
from structmap.one_process.model import FloatArray
from structmap.one_process.simple import State

BORDER = (0.03, 0.08)
_LEAST_REST = 1e-3
_POWER = 0.8
_RATIOS = 40
_FEW_RATIOS = 16
_MOST_ODD = 16
_LARGEST_LOG_RATIO = np.log(100.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Freedom:
    """Degrees of freedom of the two fits.

    Attributes
    ----------
    between : int
        Parameters that free fits have more than the shared one.
    within : int
        Left over by the free fits; below 1 the stated errors must serve as scale.
    """

    between: int
    within: int

    def statistic(self, shared: FloatArray, free: FloatArray) -> FloatArray:
        """Return the test statistic of misfits.

        Parameters
        ----------
        shared, free : ndarray
            Misfits with one value and with one for each site.

        Returns
        -------
        ndarray
            F, or the plain growth of the misfit where nothing is left over.
        """
        growth = np.maximum(shared - free, 0.0) / max(self.between, 1)
        if self.within < 1:
            return growth
        return np.asarray(growth / np.maximum(free / self.within, 1e-300))

    def chance(self, statistic: float) -> float:
        """Return the chance of a statistic by the tables, for quick decisions.

        Parameters
        ----------
        statistic : float
            As `statistic` gives it.

        Returns
        -------
        float
            Upper tail.
        """
        within = self.within if self.within > 0 else 1_000_000
        return float(fdtrc(max(self.between, 1), within, statistic))

    def power(self, noncentrality: FloatArray, critical: float) -> FloatArray:
        """Return how often a true difference exceeds a critical value.

        Parameters
        ----------
        noncentrality : ndarray
            Growth of the misfit without noise over the error scale.
        critical : float
            Value of the statistic that must be exceeded.

        Returns
        -------
        ndarray
            Probabilities.
        """
        between = max(self.between, 1)
        if self.within < 1:
            return np.asarray(1 - chndtr(critical * between, between, noncentrality))
        return np.asarray(1 - ncfdtr(between, self.within, noncentrality, critical))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Replicates:
    """Test statistics of replicates that share one value.

    Attributes
    ----------
    statistic : float
        Of the measured values, by the same code as the replicates.
    parametric, wild : ndarray of float, shape (n_replicates,)
        Of replicates with the stated errors, and with the residuals of the fit.
    """

    statistic: float
    parametric: NDArray[np.float64]
    wild: NDArray[np.float64]

    @property
    def p_parametric(self) -> float:
        """Return chance under the stated errors.

        Returns
        -------
        float
            Chance under the stated errors.
        """
        return _chance(self.statistic, self.parametric)

    @property
    def p_wild(self) -> float:
        """Return chance under errors like the residuals; NaN where there are none.

        Returns
        -------
        float
            Chance under errors like the residuals; NaN where there are none.
        """
        return _chance(self.statistic, self.wild)

    @property
    def critical(self) -> float:
        """Return the larger of the two 95 % points.

        Returns
        -------
        float
            The larger of the two 95 % points.
        """
        points = [
            float(np.quantile(part, 0.95))
            for part in (self.parametric, self.wild)
            if len(part)
        ]
        return max(points)


def make_replicates(
    solver: Solver,
    state: State,
    *,
    freedom: Freedom,
    n_replicates: int,
    rng: np.random.Generator,
) -> Replicates:
    """Refit replicates that share one value, with two kinds of noise.

    Parameters
    ----------
    solver : SimpleSolver or CompoundSolver
        Of the group.
    state : State
        The shared fit.
    freedom : Freedom
        Of the group.
    n_replicates : int
        Of each kind.
    rng : numpy.random.Generator
        Draws the noise.

    Returns
    -------
    Replicates
        Parametric: fitted values plus normal noise of the stated errors. Wild: fitted
        values plus the residuals of the shared fit over sqrt(1 - leverage), each with
        a random sign.

    References
    ----------
    .. [1] Wu, Ann. Stat. 14, 1261 (1986).
    """
    profiles = solver.profiles
    fitted = fitted_values(state, state.kernel)
    shape = (n_replicates, *fitted.shape)
    error = np.where(profiles.present, profiles.error, 0.0)
    noise = error * rng.standard_normal(shape)
    parametric = freedom.statistic(*solver.minima(fitted + noise, state))
    observed = freedom.statistic(*solver.minima(profiles.filled[None], state))
    wild = np.empty(0)
    if freedom.within > 0:
        rest = np.where(profiles.present, profiles.filled - fitted, 0.0)
        rest = rest / np.sqrt(np.maximum(1 - state.part.leverage, _LEAST_REST))
        signs = rng.integers(0, 2, size=shape) * 2 - 1
        wild = freedom.statistic(*solver.minima(fitted + rest * signs, state))
    return Replicates(statistic=float(observed[0]), parametric=parametric, wild=wild)


@dataclass(frozen=True, slots=True, kw_only=True)
class Detectable:
    """How different sites must be for the test to see it in four of five cases.

    Attributes
    ----------
    split : float
        Ratio between two halves of the group; a difference for parameters searched on
        a linear scale; infinite beyond a ratio of 100.
    one_up, one_down : float
        The same for one site that lies above, or below, the others; median over sites
        (over 16 of them in larger groups).
    """

    split: float
    one_up: float
    one_down: float


def find_detectable(
    solver: Solver, state: State, *, freedom: Freedom, critical: float, scale: float
) -> Detectable:
    """Return the smallest ratios that the test sees with a power of 80 %.

    Parameters
    ----------
    solver : SimpleSolver or CompoundSolver
        Of the group.
    state : State
        The shared fit.
    freedom : Freedom
        Of the group.
    critical : float
        95 % point of the statistic.
    scale : float
        Error scale, in squared stated errors.

    Returns
    -------
    Detectable
        Ratios, or differences for a linear scale.
    """
    n_sites = len(solver.profiles.name)
    logarithmic = solver.model.shared.scale == "log"
    width = solver.nodes[-1] - solver.nodes[0]
    largest = _LARGEST_LOG_RATIO if logarithmic else width
    sizes = np.geomspace(largest / 400, largest, _RATIOS)
    few = np.geomspace(largest / 100, largest, _FEW_RATIOS)
    alternate = np.where(np.arange(n_sites) % 2 == 0, 0.5, -0.5)

    sample = np.unique(np.linspace(0, n_sites - 1, _MOST_ODD).astype(int))
    odd = np.eye(n_sites)[sample]
    moves = np.concatenate(
        [
            sizes[:, None] * alternate,
            *(few[:, None] * one for one in np.concatenate([odd, -odd])),
        ]
    )
    growth = solver.growth(solver.moved(state, moves), state) / max(scale, 1e-12)
    power = freedom.power(growth, critical)
    ones = [
        _first_crossing(few, part)
        for part in power[_RATIOS:].reshape(2 * len(sample), _FEW_RATIOS)
    ]
    found = [
        _first_crossing(sizes, power[:_RATIOS]),
        float(np.median(ones[: len(sample)])),
        float(np.median(ones[len(sample) :])),
    ]
    split, one_up, one_down = (np.exp(size) if logarithmic else size for size in found)
    return Detectable(
        split=float(split), one_up=float(one_up), one_down=float(one_down)
    )


def _first_crossing(sizes: FloatArray, power: FloatArray) -> float:
    enough = np.nonzero(power >= _POWER)[0]
    if not len(enough):
        return float("inf")
    first = enough[0]
    if first == 0:
        return float(sizes[0])
    pair = slice(first - 1, first + 1)
    return float(np.interp(_POWER, power[pair], sizes[pair]))


def _chance(statistic: float, replicates: FloatArray) -> float:
    if not len(replicates):
        return float("nan")
    # Ties by rounding count as reached, else a noise-free fit would look distinct.
    reached = np.count_nonzero(replicates >= statistic * (1 - 1e-9))
    return float((1 + reached) / (len(replicates) + 1))
