"""Damped least squares of many small problems that start at one place.

Replicates of a group differ by their noise alone, so that they share the slopes at the
start. From there on the slopes are updated from the steps taken; an iteration needs one
evaluation of the model instead of five.
"""

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.damped import SMALL, descend, project_slope
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.problems import Problems, Projected, evaluate, take


def iterate_by_secants(
    model: Model,
    x: FloatArray,
    problems: Problems,
    *,
    tolerance: float,
    rounds: int,
) -> Problems:
    """Improve many fits that start at the same parameters.

    Parameters
    ----------
    model : Model
        What is fitted.
    x : ndarray, shape (n_points,)
        In the base unit.
    problems : Problems
        Starting points, all alike in shared parameters, and site by site in the local
        ones.
    tolerance : float
        A problem is settled when the next step promises to lower its misfit by less
        than this share.
    rounds : int
        Most iterations.

    Returns
    -------
    Problems
        Where they ended, never with a larger misfit.

    References
    ----------
    .. [1] Broyden, Math. Comput. 19, 577 (1965).
    """
    return descend(model, x, problems, _Secants(model, x), (tolerance, rounds))


class _Secants:
    """Slopes at the common start, brought up to date by the steps taken."""

    def __init__(self, model: Model, x: FloatArray) -> None:
        self.model, self.x = model, x
        self.slope: FloatArray = np.zeros(0)

    def start(self, problems: Problems) -> FloatArray:
        model, x = self.model, self.x
        shape, first = problems.value.shape, take(problems, np.arange(1))
        kernel = evaluate(model, x, first.shared, first.local)
        out = np.zeros((*kernel.shape, 3))
        for column, parameter in enumerate(
            (model.shared, model.companion, model.local)
        ):
            if parameter is None:
                continue
            shared, local = first.shared.copy(), first.local.copy()
            if column < 2:
                shared[:, column] += SMALL
            else:
                local += SMALL
            out[..., column] = (evaluate(model, x, shared, local) - kernel) / SMALL
        self.slope = np.broadcast_to(out, (*shape, 3))
        return np.broadcast_to(kernel, shape)

    def project(
        self, current: Problems, kernel: FloatArray, projected: Projected
    ) -> tuple[FloatArray, FloatArray]:
        del kernel
        columns = [
            project_slope(self.slope[..., column], current, projected)
            for column in range(3)
        ]
        return np.stack(columns[:2], axis=-1), columns[2]

    def learn(self, change: FloatArray, current: Problems, tried: Problems) -> None:
        self.slope = _updated(self.slope, change, current, tried)

    def keep(self, moving: NDArray[np.bool_]) -> None:
        self.slope = self.slope[moving]


def _updated(
    slope: FloatArray, change: FloatArray, current: Problems, tried: Problems
) -> FloatArray:
    """Return slopes that explain the last step as well, the nearest to the old ones."""
    move = np.empty((*current.local.shape, 3))
    move[..., :2] = (tried.shared - current.shared)[:, None]
    move[..., 2] = tried.local - current.local
    length2 = (move**2).sum(axis=-1, keepdims=True)
    unit: NDArray[np.float64] = move / np.maximum(length2, 1e-30)
    missing = change - (slope @ move[..., None])[..., 0]
    return np.asarray(slope + missing[..., None] * unit[..., None, :])
