"""Exchange between two sites in a spin lock (R1rho)."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.one_process.model import FloatArray, Model, Parameter

FAST_LIMIT = 8.0
"""Exchange is fast, and populations cannot be told, above this ratio of k_ex to the
shift difference: then the fast-exchange formula biases k_ex by at most 3 %."""
_REAL_TOLERANCE = 1e-9
_ROOT_STEPS, _MORE_STEPS = 4, 16
_SETTLED = 1e-5
"""Halley's steps are cubic: after one this small 1e-15 is left."""
_LOWEST = -0.25 + 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class TwoSites:
    """Two states in exchange and their relaxation without it.

    Attributes
    ----------
    exchange_rate_per_second : float
        k_ex, the sum of both rates.
    major_population : float
        Population of state A, above 0 and below 1.
    shift_difference : float
        Of B from A, in rad/s.
    r1, r2 : float
        Relaxation rates in s^-1, of both states.
    r2_minor : float or None
        Transverse rate of state B where it differs.
    """

    exchange_rate_per_second: float
    major_population: float
    shift_difference: float
    r1: float = 0.0
    r2: float = 0.0
    r2_minor: float | None = None

    @property
    def r2_of_b(self) -> float:
        """Return transverse rate of state B.

        Returns
        -------
        float
            Transverse rate of state B.
        """
        return self.r2 if self.r2_minor is None else self.r2_minor


def exact_r1rho(
    spin_lock_hertz: ArrayLike, sites: TwoSites, *, offset_hertz: float = 0.0
) -> FloatArray:
    """Return R1rho of two exchanging sites from the Bloch-McConnell matrix.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz, none below 0.
    sites : TwoSites
        Populations, rates and shifts.
    offset_hertz : float, optional
        Distance of the population-averaged resonance from the carrier in Hz.

    Returns
    -------
    ndarray of float, shape (n_points,)
        R1rho in s^-1: the real eigenvalue that decays most slowly.

    Raises
    ------
    ValueError
        If a field is negative or not finite.

    Notes
    -----
    It must be the real one: an oscillating pair can decay more slowly than the lock.

    References
    ----------
    .. [1] McConnell, J. Chem. Phys. 28, 430 (1958).
    """
    field = np.asarray(spin_lock_hertz, dtype=np.float64)
    refused = field[~(np.isfinite(field) & (field >= 0))]
    if refused.size:
        raise ValueError(f"spin_lock_hertz holds {refused[0]}; it must be 0 or more")
    offset = 2 * np.pi * offset_hertz
    matrix = _bloch_mcconnell(2 * np.pi * field, offset, sites)
    return _slowest_real_decay(matrix)


def has_two_slow_decays(
    spin_lock_hertz: ArrayLike, sites: TwoSites, *, offset_hertz: float = 0.0
) -> NDArray[np.bool_]:
    """Say where no single R1rho exists, for two real decays are similarly slow.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    sites : TwoSites
        Populations, rates and shifts.
    offset_hertz : float, optional
        Distance of the population-averaged resonance from the carrier in Hz.

    Returns
    -------
    ndarray of bool, shape (n_points,)
        True where the second real decay is less than twice as fast as the first.
    """
    field = 2 * np.pi * np.asarray(spin_lock_hertz, dtype=np.float64)
    matrix = _bloch_mcconnell(field, 2 * np.pi * offset_hertz, sites)
    decays = np.sort(_real_decays(matrix), axis=-1)
    return np.asarray(decays[..., 1] < 2 * decays[..., 0])


def trott_palmer_r1rho(
    spin_lock_hertz: ArrayLike, sites: TwoSites, *, offset_hertz: float = 0.0
) -> FloatArray:
    """Return R1rho of two exchanging sites by the formula of Trott and Palmer.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    sites : TwoSites
        Populations, rates and shifts; equal relaxation of both states.
    offset_hertz : float, optional
        Distance of the population-averaged resonance from the carrier in Hz.

    Returns
    -------
    ndarray of float, shape (n_points,)
        R1rho in s^-1. Off by more than 5 % in a seventh of cases at equal populations;
        `exact_r1rho` has no such limit.

    References
    ----------
    .. [1] Trott and Palmer, J. Magn. Reson. 154, 157 (2002).
    """
    return _closed_form(spin_lock_hertz, sites, offset_hertz, laguerre=0.0)


def laguerre_r1rho(
    spin_lock_hertz: ArrayLike, sites: TwoSites, *, offset_hertz: float = 0.0
) -> FloatArray:
    """Return R1rho of two exchanging sites by the Laguerre approximation.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    sites : TwoSites
        Populations, rates and shifts; equal relaxation of both states.
    offset_hertz : float, optional
        Distance of the population-averaged resonance from the carrier in Hz.

    Returns
    -------
    ndarray of float, shape (n_points,)
        R1rho in s^-1.

    References
    ----------
    .. [1] Miloushev and Palmer, J. Magn. Reson. 177, 221 (2005).
    """
    return _closed_form(spin_lock_hertz, sites, offset_hertz, laguerre=1.0)


def fast_exchange_r1rho(spin_lock_hertz: ArrayLike, sites: TwoSites) -> FloatArray:
    """Return the on-resonance R1rho in the limit of fast exchange.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    sites : TwoSites
        Populations, rates and shifts.

    Returns
    -------
    ndarray of float, shape (n_points,)
        R2 + p_A p_B dw^2 k_ex / (k_ex^2 + w_1^2) in s^-1.

    References
    ----------
    .. [1] Deverell, Morgan and Strange, Mol. Phys. 18, 553 (1970).
    """
    lock = 2 * np.pi * np.asarray(spin_lock_hertz, dtype=np.float64)
    rate = sites.exchange_rate_per_second
    return sites.r2 + broadening(sites) * rate / (rate**2 + lock**2)


def exchange_r1rho_model(offset_hertz: float = 0.0) -> Model:
    """Return the model of an R1rho profile under two-site exchange.

    Parameters
    ----------
    offset_hertz : float, optional
        Distance of the resonances from the carrier in Hz.

    Returns
    -------
    Model
        Named ``exchange-r1rho``; shared are k_ex and the major population, each site
        has its own shift difference and its own rate without exchange.

    Notes
    -----
    The exchange part is the Bloch-McConnell eigenvalue without relaxation, to which the
    rate without exchange adds. In fast exchange populations and shift differences
    enter only as a product, and only k_ex is determined.
    """

    def function(
        x: FloatArray, rate: FloatArray, major: FloatArray, shift: FloatArray
    ) -> FloatArray:
        return exchange_part_r1rho(x, rate, major, shift, offset_hertz)

    return Model(
        name="exchange-r1rho",
        describes="two-site exchange in a spin lock",
        function=function,
        shared=Parameter(
            name="k_ex", unit="s-1", bounds=lambda _: (10.0, 3e5), nodes=10
        ),
        companion=POPULATION,
        local=SHIFT_DIFFERENCE,
        amplitude="unit",
        baseline="nonnegative",
        x_unit="Hz",
        min_points=6,
        source="McConnell, J. Chem. Phys. 28, 430 (1958)",
    )


def exchange_part_r1rho(
    spin_lock_hertz: ArrayLike,
    exchange_rate: ArrayLike,
    major_population: ArrayLike,
    shift_difference: ArrayLike,
    offset_hertz: float = 0.0,
) -> FloatArray:
    """Return what two-site exchange adds to the spin-lock rate.

    Parameters
    ----------
    spin_lock_hertz : array_like
        Spin-lock fields in Hz.
    exchange_rate, major_population, shift_difference : array_like
        In s^-1, as the population p_A, and in rad/s; all broadcast.
    offset_hertz : float, optional
        Distance of the population-averaged resonance from the carrier in Hz.

    Returns
    -------
    ndarray of float
        In s^-1, of the common shape.

    Notes
    -----
    The characteristic polynomial of the relaxation-free matrix is solved by Halley's
    iteration from 0 upwards, which is much faster than eigenvalues of many small
    matrices; where that fails the eigenvalues are taken.
    """
    lock = 2 * np.pi * np.asarray(spin_lock_hertz, dtype=np.float64)
    rate, major, shift = (
        np.asarray(part, dtype=np.float64)
        for part in (exchange_rate, major_population, shift_difference)
    )
    offset = 2 * np.pi * offset_hertz
    decay, good = _slowest_root(lock**2, offset, rate, major, shift)
    if not good.all():
        parts = (
            np.broadcast_to(part, good.shape)[~good]
            for part in (lock, rate, major, shift)
        )
        decay[~good] = _eigenvalues(offset, *parts)
    return np.maximum(decay, 0.0)


POPULATION = Parameter(
    name="p_A", unit="", bounds=lambda _: (0.5, 0.99), scale="linear", nodes=8
)
SHIFT_DIFFERENCE = Parameter(
    name="shift difference", unit="rad/s", bounds=lambda _: (30.0, 2e4), nodes=10
)


def _eigenvalues(
    offset: float,
    lock: FloatArray,
    rate: FloatArray,
    major: FloatArray,
    shift: FloatArray,
) -> FloatArray:
    out = np.empty(len(lock))
    for row in range(len(lock)):
        sites = TwoSites(
            exchange_rate_per_second=float(rate[row]),
            major_population=float(major[row]),
            shift_difference=float(shift[row]),
        )
        matrix = _bloch_mcconnell(lock[row], offset, sites)
        out[row] = float(_slowest_real_decay(matrix))
    return out


def _slowest_root(
    lock2: FloatArray,
    offset: float,
    rate: FloatArray,
    major: FloatArray,
    shift: FloatArray,
) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Return the first root above 0 of det(M + R), without relaxation, and if it holds.

    The blocks that exchange makes are multiples of the identity, so that the
    determinant of the 6 x 6 matrix is a cubic in q = R (R - k), with one term more off
    resonance or at unequal populations; only its coefficients depend on the field. The
    roots R and k - R have one q, so that q stays a simple root where those two meet.
    Halley's iteration starts from q = 0 and goes down to -k^2 / 4 at most.
    """
    first, second = offset - (1 - major) * shift, offset + major * shift
    total, product = first + second, first * second
    uneven, rate2 = (0.5 - major) * shift, rate**2
    square = 2 * lock2 + (total**2 - 2 * product)
    linear = (lock2 + (rate2 + total**2 - 2 * product)) * lock2 + (
        product**2 + rate2 * (total**2 / 4 + uneven**2)
    )
    constant = lock2 * (rate2 * shift**2 * major * (1 - major))
    parts = (square, linear, constant, rate * uneven * total, rate2)
    root, step = np.zeros(constant.shape), np.zeros(constant.shape)
    for _ in range(_ROOT_STEPS):
        root, step = _halley(root, parts)
    moving = np.abs(step) > _SETTLED * np.abs(root)
    few = tuple(np.broadcast_to(part, root.shape)[moving] for part in parts)
    for _ in range(_MORE_STEPS if moving.any() else 0):
        root[moving], step[moving] = _halley(root[moving], few)
    good = (np.abs(step) <= _SETTLED * np.abs(root)) & (root > _LOWEST * rate2)
    return -2 * root / (rate + np.sqrt(rate2 + 4 * root)), good


def _halley(
    root: FloatArray, parts: tuple[FloatArray, ...]
) -> tuple[FloatArray, FloatArray]:
    """Return the next root and the step to it."""
    square, linear, constant, odd, rate2 = parts
    width = np.sqrt(rate2 + 4 * root)
    value = ((root + square) * root + linear + odd * width) * root + constant
    slope = (3 * root + 2 * square) * root + linear + odd * (width + 2 * root / width)
    bend = 6 * root + 2 * square + 4 * odd * (1 - root / width**2) / width
    below = 2 * slope**2 - value * bend
    step = np.divide(
        2 * value * slope, below, out=np.zeros_like(value), where=below != 0
    )
    return np.maximum(root - step, -rate2 / 4 * (1 - 1e-12)), step


def _bloch_mcconnell(lock: FloatArray, offset: float, sites: TwoSites) -> FloatArray:
    """Return the matrix for (MxA, MyA, MzA, MxB, MyB, MzB), shape (..., 6, 6)."""
    forth = (1 - sites.major_population) * sites.exchange_rate_per_second
    back = sites.major_population * sites.exchange_rate_per_second
    first = offset - (1 - sites.major_population) * sites.shift_difference
    second = offset + sites.major_population * sites.shift_difference
    matrix = np.zeros((*np.shape(lock), 6, 6))
    for start, turn, r2, leaving in (
        (0, first, sites.r2, forth),
        (3, second, sites.r2_of_b, back),
    ):
        x, y, z = start, start + 1, start + 2
        matrix[..., x, x] = matrix[..., y, y] = -r2 - leaving
        matrix[..., z, z] = -sites.r1 - leaving
        matrix[..., x, y], matrix[..., y, x] = -turn, turn
        matrix[..., y, z], matrix[..., z, y] = -lock, lock
    for axis in range(3):
        matrix[..., axis, axis + 3] = back
        matrix[..., axis + 3, axis] = forth
    return matrix


def _real_decays(matrix: FloatArray) -> FloatArray:
    roots = np.linalg.eigvals(matrix)
    size = np.abs(roots).max(axis=-1, keepdims=True)
    real = np.abs(roots.imag) <= _REAL_TOLERANCE * size
    return np.where(real, -roots.real, np.inf)


def _slowest_real_decay(matrix: FloatArray) -> FloatArray:
    return np.asarray(_real_decays(matrix).min(axis=-1))


def broadening(sites: TwoSites) -> float:
    """Return the amplitude of exchange broadening.

    Parameters
    ----------
    sites : TwoSites
        Populations and shifts.

    Returns
    -------
    float
        The product p_A p_B dw^2 in rad^2 s^-2.
    """
    major = sites.major_population
    return major * (1 - major) * sites.shift_difference**2


def _closed_form(
    spin_lock_hertz: ArrayLike, sites: TwoSites, offset_hertz: float, *, laguerre: float
) -> FloatArray:
    lock2 = (2 * np.pi * np.asarray(spin_lock_hertz, dtype=np.float64)) ** 2
    offset = 2 * np.pi * offset_hertz
    major, minor = sites.major_population, 1 - sites.major_population
    rate2 = sites.exchange_rate_per_second**2
    first2 = lock2 + (offset - minor * sites.shift_difference) ** 2
    second2 = lock2 + (offset + major * sites.shift_difference) ** 2
    effective2 = lock2 + offset**2
    sine2 = lock2 / effective2
    amplitude = sine2 * broadening(sites)
    mean = 2 * rate2 * (major * first2 + minor * second2)
    correction = 1 + mean / (first2 * second2 + effective2 * rate2)
    below = first2 * second2 / effective2 + rate2 - laguerre * amplitude * correction
    exchange = amplitude * sites.exchange_rate_per_second / below
    return sites.r1 * (1 - sine2) + sites.r2 * sine2 + exchange
