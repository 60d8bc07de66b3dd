"""Exponential build-up and decay."""

import numpy as np
from numpy.typing import ArrayLike

from structmap.one_process.model import FloatArray, Model, Parameter


def exponential_decay(time_second: ArrayLike, rate_per_second: ArrayLike) -> FloatArray:
    """Return exp(-k t), the kernel of build-up and decay alike.

    Parameters
    ----------
    time_second : array_like
        Times.
    rate_per_second : array_like
        Rate k, in one over the unit of time; broadcasts.

    Returns
    -------
    ndarray of float
        1 at time 0.
    """
    return np.asarray(np.exp(-np.asarray(rate_per_second) * np.asarray(time_second)))


def build_up_with_loss(
    time_second: ArrayLike, *, build_up_second: float, loss_second: float
) -> FloatArray:
    """Return a signal that is fed with one time constant and lost with another.

    Parameters
    ----------
    time_second : array_like
        Times in s.
    build_up_second, loss_second : float
        Time constants, which must differ.

    Returns
    -------
    ndarray of float
        (exp(-t/T_d) - exp(-t/T_b)) / (1 - T_b/T_d), for full transfer 1.

    Raises
    ------
    ValueError
        If both constants are equal.
    """
    if np.isclose(build_up_second, loss_second, rtol=1e-9):
        raise ValueError(f"build_up_second and loss_second are both {loss_second}")
    time = np.asarray(time_second, dtype=np.float64)
    difference = np.exp(-time / loss_second) - np.exp(-time / build_up_second)
    return np.asarray(difference / (1 - build_up_second / loss_second))


def exponential_model() -> Model:
    """Return the model of a build-up or decay with one rate.

    Returns
    -------
    Model
        Named ``exponential``, shared parameter k in s^-1; sign and baseline are free.

    Notes
    -----
    The rates searched are 0.01 over the longest time to 10 over the shortest one.
    """
    return Model(
        name="exponential",
        describes="exponential build-up or decay",
        function=exponential_decay,
        shared=Parameter(name="k", unit="s-1", bounds=_rate_bounds),
        x_unit="s",
        source="first-order kinetics",
    )


def _rate_bounds(time: FloatArray) -> tuple[float, float]:
    later = time[time > 0]
    return 0.01 / later.max(), 10 / later.min()
