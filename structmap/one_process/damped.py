"""Damped least squares of many small problems at once, baselines projected out."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

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

ROUNDS = 60
SMALL = 1e-6


def iterate(
    model: Model,
    x: FloatArray,
    problems: Problems,
    *,
    tolerance: float = 1e-13,
    rounds: int = ROUNDS,
    fixed: bool = False,
) -> Problems:
    """Improve many fits by damped least squares.

    Parameters
    ----------
    model : Model
        What is fitted.
    x : ndarray, shape (n_points,)
        In the base unit.
    problems : Problems
        Starting points.
    tolerance : float, optional
        A problem is settled when the next step promises to lower its misfit by less
        than this share.
    rounds : int, optional
        Most iterations.
    fixed : bool, optional
        Keep the shared parameter where it is.

    Returns
    -------
    Problems
        Where they ended, never with a larger misfit.

    References
    ----------
    .. [1] Marquardt, J. Soc. Ind. Appl. Math. 11, 431 (1963).
    .. [2] Golub and Pereyra, SIAM J. Numer. Anal. 10, 413 (1973).
    """
    bounds = find_bounds(model, x)
    done = start_store(problems)
    current, active = problems, np.arange(len(problems.chi2))
    kernel = evaluate(model, x, problems.shared, problems.local)
    projected = project(model, problems, kernel)
    current = replace(problems, chi2=(projected.residual**2).sum(axis=(1, 2)))
    damping = np.full(len(active), 1e-3)
    for _ in range(rounds):
        slopes = _slopes(model, x, current, kernel, projected=projected, fixed=fixed)
        step = solve_steps(projected.residual, *slopes, damping=damping)
        tried = move_problems(current, step, bounds)
        tried_kernel = evaluate(model, x, tried.shared, tried.local)
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
        active, damping = active[moving], damping[moving]
        if not len(active):
            break
        current, kernel = take(current, moving), kernel[moving]
        projected = projected.keep(moving)
    else:
        done.store(active, current)
    return replace(problems, shared=done.shared, local=done.local, chi2=done.chi2)


@dataclass(slots=True, eq=False, kw_only=True)
class Store:
    """Where the problems stand, filled in as they settle.

    Attributes
    ----------
    shared, local, chi2 : ndarray of float
        As in `Problems`.
    """

    shared: FloatArray
    local: FloatArray
    chi2: FloatArray

    def store(self, index: NDArray[np.int64], current: Problems) -> None:
        """Note where some of the problems stand.

        Parameters
        ----------
        index : ndarray of int
            Which they are.
        current : Problems
            Where they stand.
        """
        self.shared[index] = current.shared
        self.local[index] = current.local
        self.chi2[index] = current.chi2


def start_store(problems: Problems) -> Store:
    """Return the store of problems that have not moved.

    Parameters
    ----------
    problems : Problems
        Starting points.

    Returns
    -------
    Store
        A copy of where they stand.
    """
    return Store(
        shared=problems.shared.copy(),
        local=problems.local.copy(),
        chi2=problems.chi2.copy(),
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Step:
    """Steps of shared and local parameters, and the gain that they promise.

    Attributes
    ----------
    shared : ndarray of float, shape (n_problems, 2)
        Along the axes of shared parameter and companion.
    local : ndarray of float, shape (n_problems, n_sites)
        Along the axis of the parameter of the sites.
    gain : ndarray of float, shape (n_problems,)
        By how much the misfit falls if the slopes hold.
    """

    shared: FloatArray
    local: FloatArray
    gain: FloatArray


def _slopes(
    model: Model,
    x: FloatArray,
    current: Problems,
    kernel: FloatArray,
    *,
    projected: Projected,
    fixed: bool,
) -> tuple[FloatArray, FloatArray]:
    """Return projected slopes of the fit in shared (2) and local parameters.

    Shapes (n_problems, n_sites, n_points, 2) and (n_problems, n_sites, n_points).
    """
    columns = []
    for column in range(2):
        absent = (column == 0 and fixed) or (column == 1 and model.companion is None)
        if absent:
            columns.append(np.zeros_like(kernel))
            continue
        shared = current.shared.copy()
        shared[:, column] += SMALL
        moved = evaluate(model, x, shared, current.local)
        columns.append(project_slope((moved - kernel) / SMALL, current, projected))
    local = np.zeros_like(kernel)
    if model.local is not None:
        moved = evaluate(model, x, current.shared, current.local + SMALL)
        local = project_slope((moved - kernel) / SMALL, current, projected)
    return np.stack(columns, axis=-1), local


def project_slope(
    slope: FloatArray, current: Problems, projected: Projected
) -> FloatArray:
    """Return the slope of the weighted fit where baselines and amplitudes follow.

    Parameters
    ----------
    slope : ndarray, shape (n_problems, n_sites, n_points)
        Of the model's function in one parameter.
    current : Problems
        Where the problems stand.
    projected : Projected
        Their linear parts there.

    Returns
    -------
    ndarray, shape (n_problems, n_sites, n_points)
        At right angles to the linear parameters.
    """
    change = slope * projected.amplitude[..., None] * current.root_weight
    for unit in (projected.constant, projected.along):
        change = change - (change * unit).sum(axis=-1, keepdims=True) * unit
    return np.asarray(change)


def solve_steps(
    residual: FloatArray, shared: FloatArray, local: FloatArray, *, damping: FloatArray
) -> Step:
    """Solve the normal equations with the parameter of each site eliminated.

    Parameters
    ----------
    residual : ndarray, shape (n_problems, n_sites, n_points)
        Weighted residuals.
    shared : ndarray, shape (n_problems, n_sites, n_points, 2)
        Projected slopes in the shared parameter and the companion.
    local : ndarray, shape (n_problems, n_sites, n_points)
        Projected slopes in the parameter of the site.
    damping : ndarray, shape (n_problems,)
        Share added to the diagonal.

    Returns
    -------
    Step
        Steps, and the gains that they promise.
    """
    factor = 1 + damping
    own = (local**2).sum(axis=-1) * factor[:, None]
    own = np.where(own > 0, own, np.inf)
    pull = (local * residual).sum(axis=-1)
    mixed = np.einsum("psnq,psn->psq", shared, local)
    normal = np.einsum("psnq,psnr->pqr", shared, shared)
    diagonal = np.einsum("pqq->pq", normal).copy()
    normal = normal - np.einsum("psq,psr->pqr", mixed, mixed / own[..., None])
    extra = damping[:, None] * diagonal + 1e-12 * diagonal.max(axis=1, keepdims=True)
    normal = normal + np.einsum("pq,qr->pqr", extra + 1e-30, np.eye(2))
    normal[diagonal <= 0] = 0.0
    for column in range(2):
        empty = diagonal[:, column] <= 0
        normal[empty, :, column] = 0.0
        normal[empty, column, column] = 1.0
    right = np.einsum("psnq,psn->pq", shared, residual)
    right = right - np.einsum("psq,ps->pq", mixed, pull / own)
    step = np.linalg.solve(normal, right[..., None])[..., 0]
    rest = (pull - np.einsum("psq,pq->ps", mixed, step)) / own
    change = np.einsum("psnq,pq->psn", shared, step) + local * rest[..., None]
    gain = (change * (2 * residual - change)).sum(axis=(1, 2))
    return Step(shared=step, local=rest, gain=gain)


def move_problems(
    current: Problems, step: Step, bounds: tuple[FloatArray, FloatArray]
) -> Problems:
    """Return the problems after a step, inside the bounds.

    Parameters
    ----------
    current : Problems
        Where they stand.
    step : Step
        How far they go.
    bounds : tuple of ndarray
        As `find_bounds` gives them.

    Returns
    -------
    Problems
        With the old misfits.
    """
    limits, local = bounds
    shared = np.clip(current.shared + step.shared, limits[:, 0], limits[:, 1])
    return replace(
        current, shared=shared, local=np.clip(current.local + step.local, *local)
    )
