"""CPMG dispersion of two exchanging sites."""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.one_process.exchange import (
    POPULATION,
    SHIFT_DIFFERENCE,
    TwoSites,
    broadening,
)
from structmap.one_process.model import FloatArray, Model, Parameter

ComplexArray = NDArray[np.complex128]
_LEAST = 1e-100


def exact_cpmg(cpmg_hertz: ArrayLike, sites: TwoSites) -> FloatArray:
    """Return R2eff of a CPMG train from the exact two-site propagator.

    Parameters
    ----------
    cpmg_hertz : array_like, shape (n_points,)
        CPMG frequencies 1 / (4 t) in Hz, with 2 t between the pulses, above 0.
    sites : TwoSites
        Populations, rates and shifts.

    Returns
    -------
    ndarray of float, shape (n_points,)
        Long-train rate in s^-1, for ideal pulses.

    Raises
    ------
    ValueError
        If a frequency is not above 0 or not finite.

    References
    ----------
    .. [1] Baldwin, J. Magn. Reson. 244, 114 (2014).
    """
    frequency = np.asarray(cpmg_hertz, dtype=np.float64)
    refused = frequency[~(np.isfinite(frequency) & (frequency > 0))]
    if refused.size:
        raise ValueError(f"cpmg_hertz holds {refused[0]}; it must be above 0")
    rate, major = sites.exchange_rate_per_second, sites.major_population
    rates = np.array([sites.r2, sites.r2_of_b])
    return _cpmg_rate(frequency, rate, major, sites.shift_difference, rates=rates)


def carver_richards_cpmg(cpmg_hertz: ArrayLike, sites: TwoSites) -> FloatArray:
    """Return R2eff of a CPMG train by the formula of Carver and Richards.

    Parameters
    ----------
    cpmg_hertz : array_like, shape (n_points,)
        CPMG frequencies in Hz, above 0.
    sites : TwoSites
        Populations, rates and shifts.

    Returns
    -------
    ndarray of float, shape (n_points,)
        In s^-1; equal to `exact_cpmg`, by another route, but NaN where both decays
        of the free evolution coincide (k_ex = dw at equal populations).

    References
    ----------
    .. [1] Carver and Richards, J. Magn. Reson. 6, 89 (1972).
    .. [2] Davis, Perlman and London, J. Magn. Reson. B 104, 266 (1994).
    """
    spacing = 1 / (2 * np.asarray(cpmg_hertz, dtype=np.float64))
    rate, shift = sites.exchange_rate_per_second, sites.shift_difference
    forth = (1 - sites.major_population) * rate
    back = sites.major_population * rate
    excess = sites.r2 - sites.r2_of_b + forth - back
    psi = excess**2 - shift**2 + 4 * forth * back
    zeta = 2 * shift * excess
    root = np.hypot(psi, zeta)
    half = (psi + 2 * shift**2) / root if root > 0 else np.nan
    grow, turn = (1 + half) / 2, (-1 + half) / 2
    eta_grow = spacing / np.sqrt(2) * np.sqrt(np.maximum(root + psi, 0))
    eta_turn = spacing / np.sqrt(2) * np.sqrt(np.maximum(root - psi, 0))
    # cosh overflows for long spacings: take exp(eta_grow) out of the argument.
    scaled = grow * (1 + np.exp(-2 * eta_grow)) / 2 - turn * np.cos(eta_turn) * np.exp(
        -eta_grow
    )
    inner = np.sqrt(np.maximum(scaled**2 - np.exp(-2 * eta_grow), 0))
    arccosh = eta_grow + np.log(scaled + inner)
    return np.asarray((sites.r2 + sites.r2_of_b + rate - arccosh / spacing) / 2)


def luz_meiboom_cpmg(cpmg_hertz: ArrayLike, sites: TwoSites) -> FloatArray:
    """Return R2eff of a CPMG train in the limit of fast exchange.

    Parameters
    ----------
    cpmg_hertz : array_like, shape (n_points,)
        CPMG frequencies in Hz, above 0.
    sites : TwoSites
        Populations, rates and shifts.

    Returns
    -------
    ndarray of float, shape (n_points,)
        In s^-1. Outside fast exchange a fit with it makes sites of one process look
        distinct.

    References
    ----------
    .. [1] Luz and Meiboom, J. Chem. Phys. 39, 366 (1963).
    """
    frequency = np.asarray(cpmg_hertz, dtype=np.float64)
    rate = sites.exchange_rate_per_second
    ratio = 4 * frequency / rate
    return sites.r2 + broadening(sites) / rate * (1 - ratio * np.tanh(1 / ratio))


def constant_time_cpmg(
    cpmg_hertz: ArrayLike, sites: TwoSites, *, duration_second: float
) -> FloatArray:
    """Return R2eff as -ln(M_A(T) / M_A(0)) / T of a CPMG train of fixed length.

    Parameters
    ----------
    cpmg_hertz : array_like, shape (n_points,)
        CPMG frequencies in Hz, above 0.
    sites : TwoSites
        Populations, rates and shifts.
    duration_second : float
        Length T of the train; a whole number of cycles of 1 / cpmg_hertz.

    Returns
    -------
    ndarray of float, shape (n_points,)
        In s^-1.
    """
    frequency = np.atleast_1d(np.asarray(cpmg_hertz, dtype=np.float64))
    start = np.array([sites.major_population, 1 - sites.major_population])
    out = np.empty(len(frequency))
    for index, value in enumerate(frequency):
        cycle = _cycle(np.array(value), sites)
        n_cycles = round(duration_second * value)
        end = np.linalg.matrix_power(cycle, n_cycles) @ start
        out[index] = -np.log(abs(end[0]) / start[0]) / duration_second
    return out


def cpmg_model() -> Model:
    """Return the model of a CPMG profile under two-site exchange.

    Returns
    -------
    Model
        Named ``cpmg``; shared are k_ex and the major population, each site has its own
        shift difference and its own rate without exchange.
    """
    return Model(
        name="cpmg",
        describes="two-site exchange in a CPMG train",
        function=exchange_part_cpmg,
        shared=Parameter(
            name="k_ex", unit="s-1", bounds=lambda _: (10.0, 1e5), nodes=10
        ),
        companion=POPULATION,
        local=SHIFT_DIFFERENCE,
        amplitude="unit",
        baseline="nonnegative",
        x_unit="Hz",
        x_lowest=1e-9,
        min_points=6,
        source="Baldwin, J. Magn. Reson. 244, 114 (2014)",
    )


def _cpmg_rate(
    frequency: FloatArray,
    rate: ArrayLike,
    major: ArrayLike,
    shift: ArrayLike,
    *,
    rates: FloatArray,
) -> FloatArray:
    """Return R2eff from the largest eigenvalue of one cycle, safe at long spacings."""
    forth = (1 - np.asarray(major)) * np.asarray(rate)
    back = np.asarray(major) * np.asarray(rate)
    time = 1 / (4 * frequency)
    first = -rates[0] - forth + 0j * np.asarray(shift)
    second = -rates[1] - back - 1j * np.asarray(shift)
    mean = (first + second) / 2
    gap = (first - second) / 2
    root = np.sqrt(gap**2 + forth * back)
    growth = mean.real + np.abs(root.real)
    short = _exponential(gap, root, (forth, back), time)
    twice = _exponential(gap, root, (forth, back), 2 * time)
    product = _times(_times(short, tuple(np.conj(part) for part in twice)), short)
    trace = product[0] + product[3]
    determinant = product[0] * product[3] - product[1] * product[2]
    spread = np.sqrt(trace**2 / 4 - determinant)
    largest = np.maximum(np.abs(trace / 2 + spread), np.abs(trace / 2 - spread))
    return np.asarray(-growth - np.log(largest) / (4 * time))


_Matrix = tuple[NDArray[Any], ...]


def _exponential(
    gap: ComplexArray,
    root: ComplexArray,
    hopping: tuple[FloatArray, FloatArray],
    time: FloatArray,
) -> _Matrix:
    """Return exp(L t), its largest growth and its phase taken out."""
    forth, back = hopping
    scale = np.abs(root.real) * time
    up, down = np.exp(root * time - scale), np.exp(-root * time - scale)
    cosine = (up + down) / 2
    small = np.abs(root * time) < 1e-8
    safe = np.where(small, 1.0, root)
    sine = np.where(small, time * np.exp(-scale), (up - down) / 2 / safe)
    return cosine + sine * gap, sine * back, sine * forth, cosine - sine * gap


def _times(left: _Matrix, right: _Matrix) -> _Matrix:
    return (
        left[0] * right[0] + left[1] * right[2],
        left[0] * right[1] + left[1] * right[3],
        left[2] * right[0] + left[3] * right[2],
        left[2] * right[1] + left[3] * right[3],
    )


def _cycle(frequency: FloatArray, sites: TwoSites) -> ComplexArray:
    """Return the propagator of one cycle t, 180, 2 t, 180, t."""
    forth = (1 - sites.major_population) * sites.exchange_rate_per_second
    back = sites.major_population * sites.exchange_rate_per_second
    liouvillian = np.array(
        [
            [-sites.r2 - forth, back],
            [forth, -sites.r2_of_b - back - 1j * sites.shift_difference],
        ]
    )
    values, vectors = np.linalg.eig(liouvillian)
    time = 1 / (4 * frequency)

    def propagate(duration: FloatArray) -> ComplexArray:
        grown = vectors * np.exp(values * duration)
        return np.asarray(grown @ np.linalg.inv(vectors))

    return np.asarray(propagate(time) @ propagate(2 * time).conj() @ propagate(time))


def exchange_part_cpmg(
    cpmg_hertz: ArrayLike,
    exchange_rate: ArrayLike,
    major_population: ArrayLike,
    shift_difference: ArrayLike,
) -> FloatArray:
    """Return what two-site exchange adds to R2eff where both states relax alike.

    Parameters
    ----------
    cpmg_hertz : array_like
        CPMG frequencies in Hz, above 0.
    exchange_rate, major_population, shift_difference : array_like
        In s^-1, as the population p_A, and in rad/s; all broadcast.

    Returns
    -------
    ndarray of float
        In s^-1, of the common shape; equal to `exact_cpmg` without relaxation.

    Notes
    -----
    The largest eigenvalue of one cycle in real numbers. With k = k_ex and
    s^2 = (k^2 - dw^2)^2 + (2 dw k (1 - 2 p_A))^2 its logarithm is the arccosh of
    cosh e + (k^2 + dw^2 - s) / (2 s) (cosh e - cos f) with e^2, f^2 = tcp^2 (s +- (k^2
    - dw^2)) / 2; sums of squares stand for the differences, so that no digits are lost
    where s is small, and exp(e) is taken out, so that long spacings do not overflow.
    """
    spacing = 1 / (2 * np.asarray(cpmg_hertz, dtype=np.float64))
    rate, major, shift = (
        np.asarray(part, dtype=np.float64)
        for part in (exchange_rate, major_population, shift_difference)
    )
    rate2, shift2 = rate**2, shift**2
    psi = rate2 - shift2
    zeta = np.maximum(2 * shift * rate * np.abs(1 - 2 * major), _LEAST)
    size = np.hypot(psi, zeta)
    larger = (size + np.abs(psi)) / 2
    smaller = zeta**2 / (4 * larger)
    grow = np.sqrt(np.where(psi > 0, larger, smaller))
    turn = np.sqrt(np.where(psi > 0, smaller, larger))
    mixing = 8 * rate2 * shift2 * major * (1 - major) / (rate2 + shift2 + size)
    lost = -np.expm1(-spacing * grow)
    kept = 1 - lost
    sinh = lost**2 / 2
    above = sinh + mixing / size * (sinh + 2 * kept * np.sin(spacing * turn / 2) ** 2)
    scaled = kept + above + np.sqrt(above * (above + 2 * kept))
    return np.asarray((rate - grow - np.log(scaled) / spacing) / 2)
