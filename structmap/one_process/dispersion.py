"""Spin-lock relaxation under magic-angle spinning near rotary resonance."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.experiment import Experiment
from structmap.one_process.constants import (
    MAGNETIC_CONSTANT,
    PLANCK_REDUCED,
    PROTON_GYROMAGNETIC,
    Couplings,
    larmor_radian_per_second,
)
from structmap.one_process.model import FloatArray, Model, Parameter


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SpinLockRates:
    """Rates of a 15N spin in an N-H pair that moves with one correlation time.

    Attributes
    ----------
    averaged_density : ndarray of float, shape (n_points,)
        Spectral density averaged over the spinning side bands, in s.
    r1 : float
        Longitudinal rate in s^-1.
    transverse : ndarray of float, shape (n_points,)
        Rate of the spin-locked part, without the tilt, in s^-1.
    r1rho : ndarray of float, shape (n_points,)
        Rate along the tilted effective field in s^-1.
    """

    averaged_density: NDArray[np.float64]
    r1: float
    transverse: NDArray[np.float64]
    r1rho: NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class SimpleMotion:
    """Motion with one correlation time and an amplitude.

    Attributes
    ----------
    tau_second : float
        Correlation time.
    amplitude : float
        1 - S^2, the part of the interaction that the motion averages.
    """

    tau_second: float
    amplitude: float


def averaged_density(
    effective_field: ArrayLike, tau_second: ArrayLike, *, mas_rate_hertz: float
) -> FloatArray:
    """Return the spectral density averaged over side bands, for amplitude 1.

    Parameters
    ----------
    effective_field : array_like
        Effective spin-lock field in rad/s.
    tau_second : array_like
        Correlation time in s; broadcasts against the field.
    mas_rate_hertz : float
        Rate of magic-angle spinning in Hz.

    Returns
    -------
    ndarray of float
        [J(w - 2 w_r) + 2 J(w - w_r) + 2 J(w + w_r) + J(w + 2 w_r)] / 6 in s with
        J(w) = (2/5) tau / (1 + w^2 tau^2).

    References
    ----------
    .. [1] Kurbanov, Zinkevich and Krushelnitsky, J. Chem. Phys. 135, 184104 (2011).
    """
    field = np.asarray(effective_field, dtype=np.float64)
    tau = np.asarray(tau_second, dtype=np.float64)
    spinning = 2 * np.pi * mas_rate_hertz
    total = (
        _density(field - 2 * spinning, tau)
        + 2 * _density(field - spinning, tau)
        + 2 * _density(field + spinning, tau)
        + _density(field + 2 * spinning, tau)
    )
    return total / 6


def spin_lock_rates(
    spin_lock_hertz: ArrayLike,
    motion: SimpleMotion,
    *,
    experiment: Experiment,
    offset_hertz: float = 0.0,
    couplings: Couplings | None = None,
) -> SpinLockRates:
    """Return R1 and R1rho of the 15N of an N-H pair under magic-angle spinning.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    motion : SimpleMotion
        Correlation time and amplitude.
    experiment : Experiment
        Spinning rate and proton frequency.
    offset_hertz : float, optional
        Distance of the resonance from the carrier.
    couplings : Couplings, optional
        Bond length and shift anisotropy; the default has 1.02 Å and -172 ppm.

    Returns
    -------
    SpinLockRates
        All rates, powder-averaged initial decay.

    Notes
    -----
    Second order in the coupling: for a rigid-limit N-H coupling the formula is too high
    by 0.2 % at 20 kHz and 2.6 % at 50 kHz field with 60 kHz spinning and a correlation
    time of 10 microseconds (stochastic Liouville simulation).

    References
    ----------
    .. [1] Kurbanov, Zinkevich and Krushelnitsky, J. Chem. Phys. 135, 184104 (2011).
    .. [2] Lipari and Szabo, J. Am. Chem. Soc. 104, 4546 (1982).
    """
    pair = couplings or Couplings()
    field = np.asarray(spin_lock_hertz, dtype=np.float64)
    sine2 = tilt_sine_squared(field, offset_hertz)
    effective = 2 * np.pi * np.hypot(field, offset_hertz)
    tau, amplitude = motion.tau_second, motion.amplitude
    mean = amplitude * averaged_density(
        effective, tau, mas_rate_hertz=experiment.mas_rate_hertz
    )
    proton, nitrogen = larmor_radian_per_second(experiment.proton_frequency_megahertz)
    dipole2 = pair.dipole_radian_per_second() ** 2
    shift2 = pair.shift_radian_per_second(experiment.proton_frequency_megahertz) ** 2
    slow = amplitude * _density(np.array([nitrogen]), tau)[0]
    fast = amplitude * (
        _density(np.array([proton - nitrogen]), tau)[0]
        + 6 * _density(np.array([proton + nitrogen]), tau)[0]
    )
    high = fast + 3 * slow
    at_proton = amplitude * _density(np.array([proton]), tau)[0]
    r1 = dipole2 / 4 * high + shift2 * slow
    transverse = dipole2 / 8 * (4 * mean + high + 6 * at_proton) + shift2 / 6 * (
        4 * mean + 3 * slow
    )
    r1rho = r1 * (1 - sine2) + transverse * sine2
    return SpinLockRates(
        averaged_density=mean, r1=float(r1), transverse=transverse, r1rho=r1rho
    )


def tilt_sine_squared(
    spin_lock_hertz: ArrayLike, offset_hertz: ArrayLike
) -> FloatArray:
    """Return sin^2 of the angle between the static and the effective field.

    Parameters
    ----------
    spin_lock_hertz, offset_hertz : array_like
        In Hz; they broadcast.

    Returns
    -------
    ndarray of float
        1 on resonance.
    """
    field = np.asarray(spin_lock_hertz, dtype=np.float64)
    offset = np.asarray(offset_hertz, dtype=np.float64)
    total = field**2 + offset**2
    return np.divide(field**2, total, out=np.ones_like(total), where=total > 0)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class TiltCorrected:
    """Rates and fields after the tilt of the spin-lock axis was taken out.

    Attributes
    ----------
    effective_field_hertz, rate, error : ndarray of float
        Of one shape; fields in Hz, rates and errors in s^-1.
    """

    effective_field_hertz: NDArray[np.float64]
    rate: NDArray[np.float64]
    error: NDArray[np.float64]


def correct_for_tilt(
    r1rho: ArrayLike,
    error: ArrayLike,
    *,
    r1: ArrayLike,
    spin_lock_hertz: ArrayLike,
    offset_hertz: ArrayLike,
) -> TiltCorrected:
    """Turn R1rho measured off resonance into the rate of the spin-locked part.

    Parameters
    ----------
    r1rho, error : array_like, shape (n_sites, n_points)
        Measured rates and errors in s^-1.
    r1 : array_like, shape (n_sites, 1)
        Longitudinal rates in s^-1.
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    offset_hertz : array_like, shape (n_sites, 1)
        Distance of each resonance from the carrier in Hz.

    Returns
    -------
    TiltCorrected
        (R1rho - R1 cos^2) / sin^2 at the effective fields.

    Notes
    -----
    The error of R1 is left out; its share is cos^2 / sin^2 of it.
    """
    sine2 = tilt_sine_squared(spin_lock_hertz, offset_hertz)
    rate = (np.asarray(r1rho) - np.asarray(r1) * (1 - sine2)) / sine2
    return TiltCorrected(
        effective_field_hertz=np.hypot(spin_lock_hertz, offset_hertz),
        rate=rate,
        error=np.asarray(error) / sine2,
    )


def motion_kernel(
    effective_field_hertz: ArrayLike,
    tau_second: ArrayLike,
    *,
    experiment: Experiment,
    couplings: Couplings | None = None,
) -> FloatArray:
    """Return the part of the 15N rate that depends on the field, for amplitude 1.

    Parameters
    ----------
    effective_field_hertz : array_like
        In Hz.
    tau_second : array_like
        Correlation time in s; broadcasts against the field.
    experiment : Experiment
        Spinning rate and proton frequency.
    couplings : Couplings, optional
        Bond length and shift anisotropy.

    Returns
    -------
    ndarray of float
        The function g in rate = baseline + amplitude * g, in s^-1.

    Notes
    -----
    Only the averaged density depends on field and tau, so a wrong bond length or
    anisotropy changes the amplitude and never tau.
    """
    dipole, shift = interaction_strengths(experiment, couplings)
    effective = 2 * np.pi * np.asarray(effective_field_hertz, dtype=np.float64)
    mean = averaged_density(
        effective, tau_second, mas_rate_hertz=experiment.mas_rate_hertz
    )
    return (dipole + shift) * mean


def interaction_strengths(
    experiment: Experiment, couplings: Couplings | None = None
) -> tuple[float, float]:
    """Return the weights of dipole and shift anisotropy in the rate of 15N.

    Parameters
    ----------
    experiment : Experiment
        Its proton frequency, 0 leaves the shift anisotropy out.
    couplings : Couplings, optional
        Bond length and shift anisotropy.

    Returns
    -------
    dipole : float
        The weight d^2 / 2 in rad^2 s^-2.
    shift : float
        The weight 2 c^2 / 3; the ratio of the weights is that of the shares.
    """
    pair = couplings or Couplings()
    shift = pair.shift_radian_per_second(experiment.proton_frequency_megahertz)
    return pair.dipole_radian_per_second() ** 2 / 2, 2 * shift**2 / 3


def proton_coupling_radian_per_second(distance_angstrom: float) -> float:
    """Return the dipolar coupling constant K of two protons.

    Parameters
    ----------
    distance_angstrom : float
        Distance in Å, above 0.

    Returns
    -------
    float
        In rad/s.
    """
    distance = distance_angstrom * 1e-10
    gamma2 = PROTON_GYROMAGNETIC**2
    return MAGNETIC_CONSTANT * PLANCK_REDUCED * gamma2 / distance**3


def homonuclear_rate(
    spin_lock_hertz: ArrayLike,
    tau_second: ArrayLike,
    *,
    coupling_radian_per_second: float,
    mas_rate_hertz: float,
    offset_hertz: float = 0.0,
) -> FloatArray:
    """Return the spin-lock rate of a proton from a like spin, for amplitude 1.

    Parameters
    ----------
    spin_lock_hertz : array_like
        Spin-lock fields in Hz.
    tau_second : array_like
        Correlation time in s; broadcasts against the field.
    coupling_radian_per_second : float
        Root of the sum of K^2 over the neighbours.
    mas_rate_hertz : float
        Rate of magic-angle spinning in Hz.
    offset_hertz : float, optional
        Distance of the resonance from the carrier.

    Returns
    -------
    ndarray of float
        In s^-1.

    Notes
    -----
    The secular coupling tilted to the lock frame has parts at one and two times the
    effective field with weights (3/2) s^2 c^2 and (3/8) s^4; the lock decays with the
    square of the order of each, and spinning splits each into side bands. Redfield
    theory is only qualitative close to rotary resonance [1]_.

    References
    ----------
    .. [1] Rovó and Linser, J. Phys. Chem. B 121, 6117 (2017).
    """
    field = np.asarray(spin_lock_hertz, dtype=np.float64)
    sine2 = tilt_sine_squared(field, offset_hertz)
    effective = 2 * np.pi * np.hypot(field, offset_hertz)
    single = averaged_density(effective, tau_second, mas_rate_hertz=mas_rate_hertz)
    double = averaged_density(2 * effective, tau_second, mas_rate_hertz=mas_rate_hertz)
    mixed = sine2 * (1 - sine2) * single + sine2**2 * double
    return 9 / 8 * coupling_radian_per_second**2 * mixed


def spinning_model(
    experiment: Experiment,
    *,
    couplings: Couplings | None = None,
    neighbour_distance_angstrom: float = 2.5,
    homonuclear: bool = True,
) -> Model:
    """Return the model of a spin-lock profile under magic-angle spinning.

    Parameters
    ----------
    experiment : Experiment
        Spinning rate above 0, proton frequency, observed nucleus.
    couplings : Couplings, optional
        Bond length and shift anisotropy of the N-H pair.
    neighbour_distance_angstrom : float, optional
        For observed protons, the distance of one proton that stands for all.
    homonuclear : bool, optional
        For observed protons, whether the coupling between protons counts.

    Returns
    -------
    Model
        Named ``mas-r1rho``, shared parameter tau in s.

    Raises
    ------
    ValueError
        If the spinning rate is not above 0.

    Notes
    -----
    The times searched are 0.006 to 60 over the spinning rate; the profile bears on
    them between about 0.18 and 1.8 over the spinning rate.
    """
    rate = experiment.mas_rate_hertz
    if not rate > 0:
        raise ValueError(f"mas_rate_hertz is {rate}; it must be above 0")
    proton_pair = proton_coupling_radian_per_second(neighbour_distance_angstrom)

    def nitrogen(x: FloatArray, tau: FloatArray) -> FloatArray:
        return motion_kernel(x, tau, experiment=experiment, couplings=couplings)

    def proton(x: FloatArray, tau: FloatArray) -> FloatArray:
        dipole = interaction_strengths(experiment, couplings)[0]
        omega = 2 * np.pi * np.asarray(x, dtype=np.float64)
        rates = dipole * averaged_density(omega, tau, mas_rate_hertz=rate)
        if not homonuclear:
            return rates
        return rates + homonuclear_rate(
            x, tau, coupling_radian_per_second=proton_pair, mas_rate_hertz=rate
        )

    return Model(
        name="mas-r1rho",
        describes="spin-lock relaxation under magic-angle spinning",
        function=proton if experiment.nucleus == "1H" else nitrogen,
        shared=Parameter(
            name="tau", unit="s", bounds=lambda _: (0.006 / rate, 60 / rate)
        ),
        amplitude="nonnegative",
        baseline="nonnegative",
        x_unit="Hz",
        source="Kurbanov et al., J. Chem. Phys. 135, 184104 (2011)",
    )


def join_spinning_models(
    models: Sequence[Model],
    fields_hertz: Sequence[FloatArray],
    *,
    names: tuple[str, ...],
) -> Model:
    """Return one model of spin-lock profiles at several conditions.

    Parameters
    ----------
    models : sequence of Model
        Those of `spinning_model` at each spinning rate and proton frequency.
    fields_hertz : sequence of ndarray
        Spin-lock fields measured under each of them.
    names : tuple of str
        What each point is, in the order of the fields.

    Returns
    -------
    Model
        Its x counts the points; tau and amplitude are common, each condition has a
        baseline of its own, for what does not depend on the field differs between them.
    """
    limits = [model.shared.bounds(np.zeros(0)) for model in models]
    low, high = min(pair[0] for pair in limits), max(pair[1] for pair in limits)

    def function(x: FloatArray, tau: FloatArray) -> FloatArray:
        parts = [
            model.function(field, tau)
            for model, field in zip(models, fields_hertz, strict=True)
        ]
        whole = np.concatenate(parts, axis=-1)
        return np.asarray(whole[..., np.asarray(x, dtype=np.int64)])

    return replace(
        models[0],
        function=function,
        shared=replace(models[0].shared, bounds=lambda _: (low, high)),
        x_unit="",
        n_baselines=len(models),
        point_names=names,
    )


def _density(omega: FloatArray, tau: ArrayLike) -> FloatArray:
    time = np.asarray(tau, dtype=np.float64)
    return 0.4 * time / (1 + (omega * time) ** 2)
