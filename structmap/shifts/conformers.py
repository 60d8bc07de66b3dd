"""Two conformers: populations from pairs of peaks or from averaged shifts."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import minimize_scalar
from scipy.special import chdtrc, ndtr

from structmap.records import store_read_only
from structmap.shifts.changes import combine_changes
from structmap.shifts.peaks import SiteKey, common_nuclei, read_peaks, weights_of
from structmap.values import ValueTable

_CLEAR_PAIRING = 9.0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Populations:
    """One population of two states for a group of sites with two peaks.

    Attributes
    ----------
    log_ratio : float
        ln of the intensity of the larger state over the smaller, common to the group.
    larger : float
        Population of the larger state, 0.5 to 1.
    wrong_orientation : ndarray of float, shape (n_sites,)
        Chance that a site's stronger peak is that of the smaller state.
    p_shared : float
        Chance of such differences between the sites under one population.
    """

    log_ratio: float
    larger: float
    wrong_orientation: NDArray[np.float64]
    p_shared: float

    def __post_init__(self) -> None:
        store_read_only(self, "wrong_orientation", np.float64, (None,))


def find_populations(log_ratios: ArrayLike, errors: ArrayLike) -> Populations:
    """Return the population of two states from pairs of peak intensities.

    Parameters
    ----------
    log_ratios : array_like, shape (n_sites,)
        Logarithms ln(I1 / I2) of the two peaks of each site, in either order.
    errors : array_like
        Their standard errors, above 0.

    Returns
    -------
    Populations
        By the folded likelihood, in which each site may be either way round.

    Raises
    ------
    ValueError
        If there is no site, or an error is not above 0.

    Notes
    -----
    Averaging the larger peaks would be biased: with equal populations it gives 0.56 at
    errors of 0.3. Unequal transfer or relaxation of the two states biases intensities.
    """
    size = np.abs(np.asarray(log_ratios, dtype=np.float64))
    error = np.broadcast_to(np.asarray(errors, dtype=np.float64), size.shape)
    if not size.size or not (error > 0).all():
        raise ValueError("log_ratios must hold a site and errors be above 0")

    def cost(ratio: float) -> float:
        # Normal densities, but for a constant.
        near, far = ((size - ratio) / error) ** 2, ((size + ratio) / error) ** 2
        return float(-np.logaddexp(-near / 2, -far / 2).sum())

    nodes = np.linspace(0.0, float(size.max() + 3 * error.max()), 60)
    best = int(np.argmin([cost(node) for node in nodes]))
    bounds = (nodes[max(best - 1, 0)], nodes[min(best + 1, len(nodes) - 1)])
    found = minimize_scalar(
        cost, bounds=bounds, method="bounded", options={"xatol": 1e-10}
    )
    ratio = float(found.x) if found.fun < cost(0.0) else 0.0
    misfit = float((((size - ratio) / error) ** 2).sum())
    freedom = size.size - 1
    return Populations(
        log_ratio=ratio,
        larger=float(1 / (1 + np.exp(-ratio))),
        wrong_orientation=ndtr(-ratio / error),
        p_shared=float(chdtrc(freedom, misfit)) if freedom else float("nan"),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class Pairing:
    """Which of two peaks belongs to which of two known states.

    Attributes
    ----------
    swapped : bool
        The first peak is that of state B.
    ambiguous : bool
        Both ways fit within the errors.
    """

    swapped: bool
    ambiguous: bool


def pair_with_states(
    peaks: ArrayLike, states: ArrayLike, *, weights: ArrayLike, error: float
) -> Pairing:
    """Say which of two peaks belongs to which of two states with known shifts.

    Parameters
    ----------
    peaks, states : array_like, shape (2, n_nuclei)
        Shifts in ppm of the two peaks, and of states A and B.
    weights : array_like, shape (n_nuclei,)
        Weights of the nuclei.
    error : float
        Combined error of a shift in ppm.

    Returns
    -------
    Pairing
        The way with the smaller sum of squared changes.
    """
    seen, known = np.asarray(peaks), np.asarray(states)
    costs = [
        float((combine_changes(order - known, weights) ** 2).sum())
        for order in (seen, seen[::-1])
    ]
    ambiguous = abs(costs[0] - costs[1]) < _CLEAR_PAIRING * error**2
    return Pairing(swapped=costs[1] < costs[0], ambiguous=ambiguous)


@dataclass(frozen=True, slots=True, kw_only=True)
class FastExchange:
    """Population of state B from one averaged peak.

    Attributes
    ----------
    population_b : float
        Share of state B.
    off_line : float
        Combined change in ppm from the line between A and B; above the error there is
        a third state.
    """

    population_b: float
    off_line: float


def find_fast_population(
    seen: ArrayLike, state_a: ArrayLike, state_b: ArrayLike, *, weights: ArrayLike
) -> FastExchange:
    """Return the population of two states in fast exchange from averaged shifts.

    Parameters
    ----------
    seen, state_a, state_b : array_like, shape (n_nuclei,)
        Shifts in ppm.
    weights : array_like, shape (n_nuclei,)
        Weights of the nuclei, 1 for the proton.

    Returns
    -------
    FastExchange
        Least squares along the line from A to B.
    """
    weight2 = np.asarray(weights, dtype=np.float64) ** 2
    start = np.asarray(state_a, dtype=np.float64)
    way, moved = np.asarray(state_b) - start, np.asarray(seen) - start
    share = float((weight2 * moved * way).sum() / (weight2 * way**2).sum())
    off = float(combine_changes(moved - share * way, weights))
    return FastExchange(population_b=share, off_line=off)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class DoubledPeaks:
    """Sites with two peaks in one list, and their populations.

    Attributes
    ----------
    site : tuple
        Chain, number, insertion code.
    separation : ndarray, shape (n_sites,)
        Combined distance of the two peaks in ppm.
    population : ndarray, shape (n_sites,)
        Of the stronger peak; NaN without heights.
    common : Populations or None
        One population for all; None without heights.
    """

    site: tuple[SiteKey, ...]
    separation: NDArray[np.float64]
    population: NDArray[np.float64]
    common: Populations | None

    def __post_init__(self) -> None:
        store_read_only(self, "separation", np.float64, (len(self.site),))
        store_read_only(self, "population", np.float64, (len(self.site),))


def find_doubled_peaks(table: ValueTable, *, error: float = 0.1) -> DoubledPeaks:
    """Return the sites of a shift list that show two peaks, with populations.

    Parameters
    ----------
    table : ValueTable
        Second peaks stand in ``H_B``, ``N_B``, heights in ``height``, ``height_B``.
    error : float, optional
        Relative error of a height where none is given (common practice).

    Returns
    -------
    DoubledPeaks
        Empty where no site has a second peak.
    """
    nuclei = common_nuclei([table], None)
    peaks = read_peaks(table, nuclei)
    sites = tuple(sorted(peaks.second))
    comp_id = tuple(peaks.comp_id.get(site, "") for site in sites)
    weight = weights_of(comp_id, nuclei, None).reshape(len(sites), len(nuclei))
    gaps = [peaks.second[site] - peaks.first[site][0] for site in sites]
    separation = combine_changes(np.reshape(gaps, weight.shape), weight)
    ratio = np.array([np.log(peaks.height_ratio.get(site, np.nan)) for site in sites])
    known = np.isfinite(ratio)
    common = None
    if known.any():
        common = find_populations(ratio[known], error * np.sqrt(2))
    return DoubledPeaks(
        site=sites,
        separation=separation,
        population=1 / (1 + np.exp(-np.abs(ratio))),
        common=common,
    )
