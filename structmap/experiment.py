"""What an experiment can carry: points that are not motion, and units of x."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.errors import UnknownUnitError

Sample = Literal["protonated", "deuterated"]
Nucleus = Literal["15N", "1H"]

SPINNING_MODEL = "mas-r1rho"
AMIDE_COUPLING_HERTZ = 11480.0
"""Dipolar coupling d / 2 pi of an N-H pair at 1.02 Å; guard bands refer to it."""
GUARD_HERTZ, CAUTION_HERTZ, GUARD_SHARE = 3000.0, 10000.0, 0.05
LOWEST_FIELD_HERTZ = {"protonated": 10000.0, "deuterated": 2000.0}
SHIFT_RANGE_PPM = {"protonated": 16.0, "deuterated": 4.0}
OFFSET_MARGIN = 5.0

_UNITS: dict[str, tuple[str, float]] = {
    **dict.fromkeys(("Hz", "hz"), ("Hz", 1.0)),
    **dict.fromkeys(("kHz", "khz", "KHz"), ("Hz", 1e3)),
    "MHz": ("Hz", 1e6),
    **dict.fromkeys(("s-1", "s^-1", "1/s", "/s"), ("s-1", 1.0)),
    **dict.fromkeys(("s", "sec", "second", "seconds"), ("s", 1.0)),
    "ms": ("s", 1e-3),
    "us": ("s", 1e-6),
    "ns": ("s", 1e-9),
    "min": ("s", 60.0),
    **dict.fromkeys(("h", "hr", "hours"), ("s", 3600.0)),
    **dict.fromkeys(("M", "mol/L"), ("M", 1.0)),
    "mM": ("M", 1e-3),
    "uM": ("M", 1e-6),
    "nM": ("M", 1e-9),
    **dict.fromkeys(("K", "Kelvin", "kelvin"), ("K", 1.0)),
    **dict.fromkeys(("C", "degC", "Celsius", "celsius"), ("K", 1.0)),
}
_CELSIUS = ("C", "degC", "Celsius", "celsius")
_CELSIUS_ZERO_KELVIN = 273.15
_SHOWN_UNITS = "Hz, kHz, s, ms, us, min, h, M, mM, uM, nM, K, C"


@dataclass(frozen=True, slots=True, kw_only=True)
class Experiment:
    """The conditions that decide what a profile can carry.

    Attributes
    ----------
    mas_rate_hertz : float
        Rate of magic-angle spinning; 0 is not given.
    proton_frequency_megahertz : float
        Larmor frequency of the protons; 0 is not given.
    sample : {'protonated', 'deuterated'}
        Deuterated means that only exchangeable positions carry protons.
    nucleus : {'15N', '1H'}
        What is observed.
    coupling_hertz : float
        Dipolar coupling d / 2 pi of the observed nucleus to its nearest proton.
    lowest_field_hertz : float
        Spin-lock field below which points are left out; 0 takes the rule for the
        sample.
    largest_offset_hertz : float
        Largest plausible distance of a resonance from the carrier; 0 is not given.
    """

    mas_rate_hertz: float = 0.0
    proton_frequency_megahertz: float = 0.0
    sample: Sample = "protonated"
    nucleus: Nucleus = "15N"
    coupling_hertz: float = AMIDE_COUPLING_HERTZ
    lowest_field_hertz: float = 0.0
    largest_offset_hertz: float = 0.0


def points_left_out(
    spin_lock_hertz: ArrayLike,
    *,
    model_name: str,
    mas_rate_hertz: float,
    proton_frequency_megahertz: float,
    sample: Sample,
) -> tuple[str, ...]:
    """Say for each spin-lock field of a 15N profile why it is left out.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    model_name : str
        Only for ``mas-r1rho`` anything is left out.
    mas_rate_hertz : float
        Rate of magic-angle spinning in Hz; with 0 nothing is left out.
    proton_frequency_megahertz : float
        Larmor frequency of the protons in MHz; 0 is not given.
    sample : {'protonated', 'deuterated'}
        Decides the lowest field.

    Returns
    -------
    tuple of str, length n_points
        The reason, blank where the point is kept.

    Raises
    ------
    ValueError
        If a field is negative or not finite, or the sample is neither.

    Notes
    -----
    See `find_coherent_points` for the rules.
    """
    if model_name != SPINNING_MODEL or not mas_rate_hertz > 0:
        return ("",) * len(np.atleast_1d(spin_lock_hertz))
    experiment = Experiment(
        mas_rate_hertz=mas_rate_hertz,
        proton_frequency_megahertz=proton_frequency_megahertz,
        sample=sample,
    )
    return find_coherent_points(spin_lock_hertz, experiment)


def points_with_caution(
    spin_lock_hertz: ArrayLike,
    *,
    model_name: str,
    mas_rate_hertz: float,
    proton_frequency_megahertz: float,
    sample: Sample,
) -> tuple[str, ...]:
    """Say for each spin-lock field of a 15N profile why it is kept only with caution.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    model_name : str
        Only for ``mas-r1rho`` anything is flagged.
    mas_rate_hertz : float
        Rate of magic-angle spinning in Hz; with 0 nothing is flagged.
    proton_frequency_megahertz : float
        Larmor frequency of the protons in MHz; 0 is not given.
    sample : {'protonated', 'deuterated'}
        Decides the lowest field.

    Returns
    -------
    tuple of str, length n_points
        The reason, blank where there is none or where the point is left out.

    Raises
    ------
    ValueError
        If a field is negative or not finite, or the sample is neither.
    """
    if model_name != SPINNING_MODEL or not mas_rate_hertz > 0:
        return ("",) * len(np.atleast_1d(spin_lock_hertz))
    experiment = Experiment(
        mas_rate_hertz=mas_rate_hertz,
        proton_frequency_megahertz=proton_frequency_megahertz,
        sample=sample,
    )
    return find_doubtful_points(spin_lock_hertz, experiment)


def find_coherent_points(
    spin_lock_hertz: ArrayLike, experiment: Experiment
) -> tuple[str, ...]:
    """Say for each spin-lock field why its rate is not motion alone.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    experiment : Experiment
        With a spinning rate of 0 only the lowest field counts.

    Returns
    -------
    tuple of str, length n_points
        The reason, blank where the point is kept.

    Raises
    ------
    ValueError
        If a field is negative or not finite, or the sample is neither of the two.

    Notes
    -----
    Around the rotary-resonance conditions at one and two times the spinning rate [1]_
    points within 3 kHz (scaled by the dipolar coupling over 11.48 kHz), or 5 % of the
    condition if that is more, are left out: there the recoupled interactions dephase
    the signal and the rate of a rigid N-H pair deviates by a tenth or more. Observing
    protons, the condition at half the spinning rate [2]_ counts as well. Below 10 kHz
    or 16 ppm of the proton frequency (2 kHz or 4 ppm when deuterated) differences of
    proton shifts are matched and coherent loss looks like relaxation.

    References
    ----------
    .. [1] Oas, Griffin and Levitt, J. Chem. Phys. 89, 692 (1988).
    .. [2] Nielsen et al., J. Chem. Phys. 101, 1805 (1994).
    """
    field = _checked_field(spin_lock_hertz)
    reason = np.full(len(field), "", dtype=object)
    lowest = lowest_field_hertz(experiment)
    reason[field < lowest] = f"below {lowest / 1e3:g} kHz: coherent"
    for order in _resonances(experiment):
        condition = order * experiment.mas_rate_hertz
        width = guard_band_hertz(experiment, condition)
        inside = np.abs(field - condition) <= width * (1 + 1e-9)
        name = _condition_name(order)
        reason[inside] = f"within {width / 1e3:g} kHz of {name}"
    return tuple(str(text) for text in reason)


def find_doubtful_points(
    spin_lock_hertz: ArrayLike, experiment: Experiment
) -> tuple[str, ...]:
    """Say for each spin-lock field that is kept why it wants caution.

    Parameters
    ----------
    spin_lock_hertz : array_like, shape (n_points,)
        Spin-lock fields in Hz.
    experiment : Experiment
        With a spinning rate of 0 only the offset counts.

    Returns
    -------
    tuple of str, length n_points
        The reason, blank where there is none or where the point is left out.

    Raises
    ------
    ValueError
        If a field is negative or not finite, or the sample is neither of the two.

    Notes
    -----
    Flagged are fields closer than 10 kHz (scaled by the coupling) to one and two times
    the spinning rate; for 15N, fields within 3 kHz of half the spinning rate; and
    fields below five times the largest plausible offset, where the tilt of the
    spin-lock axis changes the rate by more than 4 %.
    """
    field = _checked_field(spin_lock_hertz)
    reason = np.full(len(field), "", dtype=object)
    scale = experiment.coupling_hertz / AMIDE_COUPLING_HERTZ
    low = field < OFFSET_MARGIN * experiment.largest_offset_hertz
    reason[low] = f"below {OFFSET_MARGIN:g} times the largest offset"
    if experiment.mas_rate_hertz > 0:
        half = np.abs(field - experiment.mas_rate_hertz / 2) < GUARD_HERTZ * scale
        reason[half] = f"near {_condition_name(0.5)}"
        for order in (1.0, 2.0):
            near = (
                np.abs(field - order * experiment.mas_rate_hertz)
                < CAUTION_HERTZ * scale
            )
            reason[near] = f"closer than {CAUTION_HERTZ * scale / 1e3:g} kHz to " + (
                _condition_name(order)
            )
    left_out = np.array(
        [bool(text) for text in find_coherent_points(field, experiment)]
    )
    reason[left_out] = ""
    return tuple(str(text) for text in reason)


def lowest_field_hertz(experiment: Experiment) -> float:
    """Return the spin-lock field below which coherent loss looks like relaxation.

    Parameters
    ----------
    experiment : Experiment
        Its own `lowest_field_hertz` overrides the rule when above 0.

    Returns
    -------
    float
        In Hz: 10 kHz or 16 ppm of the proton frequency if that is more; deuterated
        2 kHz or 4 ppm.

    Raises
    ------
    ValueError
        If the sample is neither of the two.
    """
    if experiment.sample not in LOWEST_FIELD_HERTZ:
        known = " or ".join(LOWEST_FIELD_HERTZ)
        raise ValueError(f"sample is {experiment.sample!r}; it must be {known}")
    if experiment.lowest_field_hertz > 0:
        return experiment.lowest_field_hertz
    by_shift = (
        SHIFT_RANGE_PPM[experiment.sample] * experiment.proton_frequency_megahertz
    )
    return max(LOWEST_FIELD_HERTZ[experiment.sample], by_shift)


def guard_band_hertz(experiment: Experiment, condition_hertz: float) -> float:
    """Return the half width left out around a rotary-resonance condition.

    Parameters
    ----------
    experiment : Experiment
        Its coupling scales the band.
    condition_hertz : float
        Where the condition lies, in Hz.

    Returns
    -------
    float
        In Hz; at least 5 % of the condition, for the spread of the field over the
        sample.
    """
    scale = experiment.coupling_hertz / AMIDE_COUPLING_HERTZ
    return max(GUARD_HERTZ * scale, GUARD_SHARE * condition_hertz)


def convert_to_base(
    values: ArrayLike, unit: str, *, quantity: str, base: str = ""
) -> NDArray[np.float64]:
    """Convert numbers to the base unit of their kind.

    Parameters
    ----------
    values : array_like
        Numbers in `unit`.
    unit : str
        Unit as written in a table: Hz, kHz, s, ms, us, ns, min, h, M, mM, uM, nM, K, C.
    quantity : str
        What is measured, to name it in an error.
    base : str
        Base unit that it must have (Hz, s, M, K); blank allows any.

    Returns
    -------
    ndarray of float64
        In Hz, s, M (mol/L) or K, of the shape of `values`.

    Raises
    ------
    UnknownUnitError
        If the unit is missing, unknown or of another kind.
    """
    found = base_unit(unit)
    if not found or (base and found != base):
        raise UnknownUnitError(quantity, unit, base or _SHOWN_UNITS)
    numbers = np.asarray(values, dtype=np.float64)
    key = _unit_key(unit)
    if key in _CELSIUS:
        return numbers + _CELSIUS_ZERO_KELVIN
    return numbers * _UNITS[key][1]


def base_unit(unit: str) -> str:
    """Return the base unit of a unit's kind, blank for an unknown one.

    Parameters
    ----------
    unit : str
        As written in a table.

    Returns
    -------
    str
        ``Hz``, ``s-1``, ``s``, ``M``, ``K`` or blank.
    """
    known = _UNITS.get(_unit_key(unit))
    return known[0] if known else ""


def _unit_key(unit: str) -> str:
    text = unit.strip().replace("µ", "u").replace("μ", "u").replace("°", "")
    return text.replace("deg C", "degC")


def _checked_field(spin_lock_hertz: ArrayLike) -> NDArray[np.float64]:
    field = np.atleast_1d(np.asarray(spin_lock_hertz, dtype=np.float64))
    refused = field[~(np.isfinite(field) & (field >= 0))]
    if refused.size:
        raise ValueError(f"spin_lock_hertz holds {refused[0]}; it must be 0 or more")
    return field


def _resonances(experiment: Experiment) -> tuple[float, ...]:
    if not experiment.mas_rate_hertz > 0:
        return ()
    return (0.5, 1.0, 2.0) if experiment.nucleus == "1H" else (1.0, 2.0)


def _condition_name(order: float) -> str:
    names = {0.5: "half the spinning rate", 1.0: "the spinning rate"}
    return names.get(order, "twice the spinning rate")
