"""Damped least squares of many small problems at once, baselines projected out."""

from dataclasses import dataclass, replace
from typing import Protocol

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
    return descend(
        model, x, problems, _Fresh(model, x, fixed=fixed), (tolerance, rounds)
    )


class Slopes(Protocol):
    """Where the slopes of a descent come from."""

    def start(self, problems: Problems) -> FloatArray:
        """Return the model's function at the starting points.

        Parameters
        ----------
        problems : Problems
            Starting points.

        Returns
        -------
        ndarray, shape (n_problems, n_sites, n_points)
            The function.
        """

    def project(
        self, current: Problems, kernel: FloatArray, projected: Projected
    ) -> tuple[FloatArray, FloatArray]:
        """Return the slopes of the fit where the problems stand.

        Parameters
        ----------
        current : Problems
            Where the problems stand.
        kernel : ndarray, shape (n_problems, n_sites, n_points)
            The model's function there.
        projected : Projected
            Their linear parts there.

        Returns
        -------
        tuple of ndarray
            In shared parameters, shape (n_problems, n_sites, n_points, 2), and in the
            local one.
        """

    def learn(self, change: FloatArray, current: Problems, tried: Problems) -> None:
        """Take notice of a step.

        Parameters
        ----------
        change : ndarray, shape (n_problems, n_sites, n_points)
            Of the model's function over the step.
        current, tried : Problems
            Where the step began and where it led.
        """

    def keep(self, moving: NDArray[np.bool_]) -> None:
        """Go on with some of the problems.

        Parameters
        ----------
        moving : ndarray of bool, shape (n_problems,)
            Which they are.
        """


def descend(
    model: Model,
    x: FloatArray,
    problems: Problems,
    slopes: Slopes,
    until: tuple[float, int],
) -> Problems:
    """Improve many fits by damped least squares with slopes of some source.

    Parameters
    ----------
    model : Model
        What is fitted.
    x : ndarray, shape (n_points,)
        In the base unit.
    problems : Problems
        Starting points.
    slopes : Slopes
        Gives the slopes.
    until : tuple of float and int
        Tolerance and most iterations, as in `iterate`.

    Returns
    -------
    Problems
        Where they ended, never with a larger misfit.
    """
    bounds, done = find_bounds(model, x), start_store(problems)
    tolerance, rounds = until
    kernel = slopes.start(problems)
    projected = project(model, problems, kernel)
    current = replace(problems, chi2=(projected.residual**2).sum(axis=(1, 2)))
    active = np.arange(len(problems.chi2))
    damping = np.full(len(active), 1e-3)
    for _ in range(rounds):
        own = slopes.project(current, kernel, projected)
        step = solve_steps(projected.residual, *own, damping=damping)
        tried = move_problems(current, step, bounds)
        tried_kernel = evaluate(model, x, tried.shared, tried.local)
        slopes.learn(tried_kernel - kernel, current, tried)
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
        current, projected = take(current, moving), projected.keep(moving)
        slopes.keep(moving)
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


class _Fresh:
    """Slopes by differences, made anew in each iteration."""

    def __init__(self, model: Model, x: FloatArray, *, fixed: bool) -> None:
        self.model, self.x, self.fixed = model, x, fixed

    def start(self, problems: Problems) -> FloatArray:
        return evaluate(self.model, self.x, problems.shared, problems.local)

    def project(
        self, current: Problems, kernel: FloatArray, projected: Projected
    ) -> tuple[FloatArray, FloatArray]:
        model, x = self.model, self.x
        columns = []
        for column in range(2):
            absent = self.fixed if column == 0 else model.companion is None
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

    def learn(self, change: FloatArray, current: Problems, tried: Problems) -> None:
        pass

    def keep(self, moving: NDArray[np.bool_]) -> None:
        pass


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
