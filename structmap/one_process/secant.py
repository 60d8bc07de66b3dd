"""Damped least squares of many small problems that start at one place.

Replicates of a group differ by their noise alone, so that they share the slopes at the
start. From there on the slopes are updated from the steps taken; an iteration needs one
evaluation of the model instead of five.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.damped import (
    SMALL,
    move_problems,
    project_slope,
    solve_steps,
    start_store,
)
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.problems import (
    Problems,
    Projected,
    choose,
    choose_projected,
    evaluate,
    find_bounds,
    project,
    take,
)


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
    bounds, done = find_bounds(model, x), start_store(problems)
    kernel, slope = _start(model, x, problems)
    projected = project(model, problems, kernel)
    current = replace(problems, chi2=(projected.residual**2).sum(axis=(1, 2)))
    active = np.arange(len(problems.chi2))
    damping = np.full(len(active), 1e-3)
    for _ in range(rounds):
        slopes = _projected(slope, current, projected)
        step = solve_steps(projected.residual, *slopes, damping=damping)
        tried = move_problems(current, step, bounds)
        tried_kernel = evaluate(model, x, tried.shared, tried.local)
        slope = _updated(slope, tried_kernel - kernel, current, tried)
        tried_projected = project(model, tried, tried_kernel)
        chi2 = (tried_projected.residual**2).sum(axis=(1, 2))
        better = chi2 < current.chi2
        damping = np.clip(np.where(better, 0.1 * damping, 10 * damping), 1e-9, 1e9)
        current = choose(better, replace(tried, chi2=chi2), current)
        kernel = np.where(better[:, None, None], tried_kernel, kernel)
        projected = choose_projected(better, tried_projected, projected)
        moving = (step.gain > tolerance * current.chi2 + 1e-14) & (damping < 1e8)
        if moving.all():
            continue
        done.store(active, current)
        active, damping, kernel = active[moving], damping[moving], kernel[moving]
        if not len(active):
            break
        current, slope = take(current, moving), slope[moving]
        projected = projected.keep(moving)
    else:
        done.store(active, current)
    return replace(problems, shared=done.shared, local=done.local, chi2=done.chi2)


def _start(
    model: Model, x: FloatArray, problems: Problems
) -> tuple[FloatArray, FloatArray]:
    """Return function and slopes in its parameters at the place of all problems."""
    shape, first = problems.value.shape, take(problems, np.arange(1))
    kernel = evaluate(model, x, first.shared, first.local)
    out = np.zeros((*kernel.shape, 3))
    for column, parameter in enumerate((model.shared, model.companion, model.local)):
        if parameter is None:
            continue
        shared, local = first.shared.copy(), first.local.copy()
        if column < 2:
            shared[:, column] += SMALL
        else:
            local += SMALL
        out[..., column] = (evaluate(model, x, shared, local) - kernel) / SMALL
    return np.broadcast_to(kernel, shape), np.broadcast_to(out, (*shape, 3))


def _projected(
    slope: FloatArray, current: Problems, projected: Projected
) -> tuple[FloatArray, FloatArray]:
    columns = [
        project_slope(slope[..., column], current, projected) for column in range(3)
    ]
    return np.stack(columns[:2], axis=-1), columns[2]


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
