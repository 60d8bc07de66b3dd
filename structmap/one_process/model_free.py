"""Order parameter and correlation time from R1, R2 or R1rho, and heteronuclear NOE."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import minimize_scalar

from structmap.one_process.constants import (
    NITROGEN_GYROMAGNETIC,
    PROTON_GYROMAGNETIC,
    Couplings,
    larmor_radian_per_second,
)
from structmap.one_process.model import FloatArray, Model, Parameter

SOLUTION = Couplings(distance_angstrom=1.02, shift_anisotropy_ppm=-160.0)
"""Couplings customary for 15N in solution."""
MOBILE_NOE = 0.65
"""Sites with a smaller NOE move fast internally and are no guide to the tumbling
(common practice)."""
TUMBLING_BOUNDS_SECOND = (1e-10, 1e-6)
_FAST_BOUNDS_SECOND = (1e-12, 5e-10)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SolutionRates:
    """Relaxation of the 15N of an N-H pair in solution.

    Attributes
    ----------
    r1, r2, noe : ndarray of float
        R1 and R2 in s^-1; the steady-state NOE has no unit.
    """

    r1: NDArray[np.float64]
    r2: NDArray[np.float64]
    noe: NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class ModelFreeFit:
    """Internal motion of one site at a given tumbling time.

    Attributes
    ----------
    order_parameter : float
        S^2; above 1 the rates are faster than tumbling alone allows.
    order_error : float
        Its standard error at the given tumbling time.
    internal_second : float
        Effective internal correlation time; NaN where the NOE does not tell.
    chi2 : float
        Misfit; one degree of freedom for R1, R2 and NOE.
    """

    order_parameter: float
    order_error: float
    internal_second: float
    chi2: float


def solution_rates(
    tumbling_second: ArrayLike,
    *,
    proton_frequency_megahertz: float,
    order_parameter: ArrayLike = 1.0,
    internal_second: ArrayLike = 0.0,
    couplings: Couplings = SOLUTION,
) -> SolutionRates:
    """Return R1, R2 and NOE of an N-H pair with internal motion.

    Parameters
    ----------
    tumbling_second : array_like
        Correlation time of the isotropic tumbling in s.
    proton_frequency_megahertz : float
        Larmor frequency of the protons in MHz.
    order_parameter : array_like, optional
        S^2, from 0 to 1.
    internal_second : array_like, optional
        Effective correlation time of the internal motion in s.
    couplings : Couplings, optional
        Bond length and shift anisotropy.

    Returns
    -------
    SolutionRates
        Of the common shape of the inputs.

    References
    ----------
    .. [1] Lipari and Szabo, J. Am. Chem. Soc. 104, 4546 (1982).
    """
    proton, nitrogen = larmor_radian_per_second(proton_frequency_megahertz)
    tumbling = np.asarray(tumbling_second, dtype=np.float64)
    internal = np.asarray(internal_second, dtype=np.float64)
    order = np.asarray(order_parameter, dtype=np.float64)
    effective = tumbling * internal / (tumbling + internal)

    def density(omega: float) -> FloatArray:
        slow = order * tumbling / (1 + (omega * tumbling) ** 2)
        fast = (1 - order) * effective / (1 + (omega * effective) ** 2)
        return np.asarray(0.4 * (slow + fast))

    dipole2 = couplings.dipole_radian_per_second() ** 2
    shift2 = couplings.shift_radian_per_second(proton_frequency_megahertz) ** 2
    own, zero = density(nitrogen), density(0.0)
    minus, plus = density(proton - nitrogen), density(proton + nitrogen)
    high = minus + 3 * own + 6 * plus
    r1 = dipole2 / 4 * high + shift2 * own
    r2 = dipole2 / 8 * (4 * zero + high + 6 * density(proton))
    r2 = r2 + shift2 / 6 * (4 * zero + 3 * own)
    cross = dipole2 / 4 * (6 * plus - minus)
    noe = 1 + PROTON_GYROMAGNETIC / NITROGEN_GYROMAGNETIC * cross / r1
    return SolutionRates(r1=r1, r2=r2, noe=noe)


def tumbling_model(
    observables: tuple[str, ...], proton_frequencies_megahertz: tuple[float, ...]
) -> Model:
    """Return the model of R1 and R2 with one tumbling time for all sites.

    Parameters
    ----------
    observables : tuple of str
        ``R1`` or ``R2`` for each point.
    proton_frequencies_megahertz : tuple of float
        The field of each point in MHz.

    Returns
    -------
    Model
        Named ``model-free``; x is the number of the point, the shared parameter tau in
        s, the amplitude of a site its S^2.

    Raises
    ------
    ValueError
        If the lengths differ or an observable is neither R1 nor R2.

    Notes
    -----
    Holds for internal motion much faster than tumbling, which a high NOE shows; sites
    with a NOE below 0.65 should be left out. Slow exchange adds to R2 and looks like a
    longer time.
    """
    if len(observables) != len(proton_frequencies_megahertz):
        raise ValueError(f"{len(observables)} observables for other numbers of fields")
    for name in observables:
        if name not in ("R1", "R2"):
            raise ValueError(f"observables holds {name!r}; it must be R1 or R2")

    def function(x: FloatArray, tau: FloatArray) -> FloatArray:
        time = np.asarray(tau, dtype=np.float64)
        fields = sorted(set(proton_frequencies_megahertz))
        by_field = [solution_rates(time, proton_frequency_megahertz=f) for f in fields]
        columns = []
        for point, name in enumerate(observables):
            rates = by_field[fields.index(proton_frequencies_megahertz[point])]
            part = rates.r1 if name == "R1" else rates.r2
            columns.append(part[..., 0] if part.ndim else part)
        return np.stack(columns, axis=-1)[..., np.asarray(x, dtype=np.int64)]

    return Model(
        name="model-free",
        describes="tumbling with one correlation time",
        function=function,
        shared=Parameter(name="tau", unit="s", bounds=lambda _: TUMBLING_BOUNDS_SECOND),
        amplitude="nonnegative",
        baseline="none",
        min_points=2,
        source="Lipari and Szabo, J. Am. Chem. Soc. 104, 4546 (1982)",
        point_names=tuple(
            f"{rate} at {field:g} MHz"
            for rate, field in zip(
                observables, proton_frequencies_megahertz, strict=True
            )
        ),
    )


def fit_model_free(
    measured: ArrayLike,
    error: ArrayLike,
    *,
    tumbling_second: float,
    proton_frequency_megahertz: float,
) -> ModelFreeFit:
    """Fit S^2 and the internal correlation time of one site.

    Parameters
    ----------
    measured, error : array_like, shape (3,)
        R1 and R2 in s^-1 and the NOE, with their errors.
    tumbling_second : float
        Tumbling time, shared by the molecule.
    proton_frequency_megahertz : float
        Larmor frequency of the protons in MHz.

    Returns
    -------
    ModelFreeFit
        At the lowest misfit over internal times of 1 to 500 ps.
    """
    value = np.asarray(measured, dtype=np.float64)
    sigma = np.asarray(error, dtype=np.float64)

    def misfit(log_internal: float) -> tuple[float, float, float]:
        return _fit_order(
            value,
            sigma,
            (tumbling_second, float(np.exp(log_internal))),
            proton_frequency_megahertz,
        )

    low, high = np.log(_FAST_BOUNDS_SECOND)
    nodes = np.linspace(low, high, 25)
    best = nodes[int(np.argmin([misfit(node)[0] for node in nodes]))]
    step = nodes[1] - nodes[0]
    bounds = (max(low, best - step), min(high, best + step))
    found = minimize_scalar(lambda u: misfit(u)[0], bounds=bounds, method="bounded")
    chi2, order, order_error = misfit(float(found.x))
    at_edge = min(found.x - low, high - found.x) < 1e-3
    internal = np.nan if at_edge or order >= 1 else float(np.exp(found.x))
    return ModelFreeFit(
        order_parameter=order,
        order_error=order_error,
        internal_second=internal,
        chi2=chi2,
    )


def _fit_order(
    value: FloatArray,
    sigma: FloatArray,
    times: tuple[float, float],
    proton_frequency_megahertz: float,
) -> tuple[float, float, float]:
    """Return misfit, S^2 and its error; R1, R2 and R1 (NOE - 1) are linear in S^2."""
    parts = [
        solution_rates(
            times[0],
            proton_frequency_megahertz=proton_frequency_megahertz,
            order_parameter=order,
            internal_second=times[1],
        )
        for order in (0.0, 1.0)
    ]
    bottom, top = (
        np.array([part.r1, part.r2, part.r1 * (part.noe - 1)]) for part in parts
    )
    r1, noe = value[0], value[2]
    data = np.array([r1, value[1], r1 * (noe - 1)])
    # The cross term is weighted by the error of the NOE; that of R1 counts once.
    errors = np.array([sigma[0], sigma[1], abs(r1) * sigma[2]])
    slope = (top - bottom) / errors
    rest = (data - bottom) / errors
    weight = float(slope @ slope)
    order = float(slope @ rest) / weight
    residual = rest - order * slope
    return float(residual @ residual), order, float(1 / np.sqrt(weight))
