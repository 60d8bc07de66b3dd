"""Damped least squares of many small problems at once, baselines projected out."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.model import FloatArray, Model
from structmap.one_process.search import from_axis, to_axis

ROUNDS = 60
_SMALL = 1e-5
Grids = tuple[FloatArray, FloatArray, FloatArray]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Problems:
    """Many fits side by side, with where they stand.

    Attributes
    ----------
    value, root_weight : ndarray, shape (n_problems, n_sites, n_points)
        Values, and one over the errors, 0 where missing.
    shared : ndarray, shape (n_problems, 2)
        Position on the axis of the shared parameter, and of the companion.
    local : ndarray, shape (n_problems, n_sites)
        Positions of the parameters of the sites.
    chi2 : ndarray, shape (n_problems,)
        Misfit there.
    """

    value: NDArray[np.float64]
    root_weight: NDArray[np.float64]
    shared: NDArray[np.float64]
    local: NDArray[np.float64]
    chi2: NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Projected:
    """Weighted residuals after baselines and amplitudes, and the space these span."""

    residual: NDArray[np.float64]
    amplitude: NDArray[np.float64]
    baseline: NDArray[np.float64]
    constant: NDArray[np.float64]
    along: NDArray[np.float64]

    def keep(self, which: NDArray[np.bool_]) -> "Projected":
        """Return the same for some of the problems.

        Parameters
        ----------
        which : ndarray of bool
            The problems to keep.

        Returns
        -------
        Projected
            The same for some of the problems.
        """
        return Projected(
            residual=self.residual[which],
            amplitude=self.amplitude[which],
            baseline=self.baseline[which],
            constant=self.constant[which],
            along=self.along[which],
        )


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
    bounds = _bounds(model, x)
    done = _settle(problems)
    current, active = problems, np.arange(len(problems.chi2))
    kernel = evaluate(model, x, problems.shared, problems.local)
    projected = project(model, problems, kernel)
    current = replace(problems, chi2=(projected.residual**2).sum(axis=(1, 2)))
    damping = np.full(len(active), 1e-3)
    for _ in range(rounds):
        slopes = _slopes(model, x, current, kernel, projected=projected, fixed=fixed)
        step = _solve_steps(projected.residual, *slopes, damping=damping)
        tried = _moved_problems(current, step, bounds)
        tried_kernel = evaluate(model, x, tried.shared, tried.local)
        tried_projected = project(model, tried, tried_kernel)
        chi2 = (tried_projected.residual**2).sum(axis=(1, 2))
        better = chi2 < current.chi2
        damping = np.clip(np.where(better, 0.1 * damping, 10 * damping), 1e-9, 1e9)
        current = _choose(better, replace(tried, chi2=chi2), current)
        kernel = np.where(better[:, None, None], tried_kernel, kernel)
        projected = _choose_projected(better, tried_projected, projected)
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
class _Done:
    """Where the problems stand, filled in as they settle."""

    shared: FloatArray
    local: FloatArray
    chi2: FloatArray

    def store(self, index: NDArray[np.int64], current: Problems) -> None:
        self.shared[index] = current.shared
        self.local[index] = current.local
        self.chi2[index] = current.chi2


def _settle(problems: Problems) -> _Done:
    return _Done(
        shared=problems.shared.copy(),
        local=problems.local.copy(),
        chi2=problems.chi2.copy(),
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Step:
    """Steps of shared and local parameters, and the gain that they promise."""

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
        shared[:, column] += _SMALL
        moved = evaluate(model, x, shared, current.local)
        columns.append(_slope(moved, kernel, current, projected))
    local = np.zeros_like(kernel)
    if model.local is not None:
        moved = evaluate(model, x, current.shared, current.local + _SMALL)
        local = _slope(moved, kernel, current, projected)
    return np.stack(columns, axis=-1), local


def _slope(
    moved: FloatArray, kernel: FloatArray, current: Problems, projected: Projected
) -> FloatArray:
    change = (moved - kernel) / _SMALL * projected.amplitude[..., None]
    change = change * current.root_weight
    for unit in (projected.constant, projected.along):
        change = change - (change * unit).sum(axis=-1, keepdims=True) * unit
    return np.asarray(change)


def _solve_steps(
    residual: FloatArray, shared: FloatArray, local: FloatArray, *, damping: FloatArray
) -> _Step:
    """Solve the normal equations with the parameter of each site eliminated."""
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
    return _Step(shared=step, local=rest, gain=gain)


def _moved_problems(
    current: Problems, step: _Step, bounds: tuple[FloatArray, FloatArray]
) -> Problems:
    limits, local = bounds
    shared = np.clip(current.shared + step.shared, limits[:, 0], limits[:, 1])
    return replace(
        current, shared=shared, local=np.clip(current.local + step.local, *local)
    )


def _choose(better: NDArray[np.bool_], new: Problems, old: Problems) -> Problems:
    return replace(
        old,
        shared=np.where(better[:, None], new.shared, old.shared),
        local=np.where(better[:, None], new.local, old.local),
        chi2=np.where(better, new.chi2, old.chi2),
    )


def _choose_projected(
    better: NDArray[np.bool_], new: Projected, old: Projected
) -> Projected:
    two, three = better[:, None], better[:, None, None]
    return Projected(
        residual=np.where(three, new.residual, old.residual),
        amplitude=np.where(two, new.amplitude, old.amplitude),
        baseline=np.where(two, new.baseline, old.baseline),
        constant=np.where(three, new.constant, old.constant),
        along=np.where(three, new.along, old.along),
    )


def project(model: Model, problems: Problems, kernel: FloatArray) -> Projected:
    """Return solve baselines and amplitudes of all sites of all problems.

    Parameters
    ----------
    model : Model
        Says which linear parameters there are.
    problems : Problems
        Values and weights.
    kernel : ndarray, shape (n_problems, n_sites, n_points)
        The model's function.

    Returns
    -------
    Projected
        Solve baselines and amplitudes of all sites of all problems.
    """
    root, value = problems.root_weight, problems.value
    weighted, data = kernel * root, value * root
    constant = np.zeros_like(data)
    if model.baseline != "none":
        length = np.sqrt((root**2).sum(axis=-1, keepdims=True))
        constant = root / np.maximum(length, 1e-300)
    along = np.zeros_like(data)
    amplitude = np.ones(data.shape[:-1])
    if model.amplitude != "unit":
        centred = weighted - _along(weighted, constant)
        length = np.sqrt((centred**2).sum(axis=-1, keepdims=True))
        shaped = length > 1e-6 * np.sqrt((weighted**2).sum(axis=-1, keepdims=True))
        np.divide(centred, length, out=along, where=shaped)
        size = (along * data).sum(axis=-1, keepdims=True)
        if model.amplitude == "nonnegative":
            along = np.where(size > 0, along, 0.0)
            size = np.maximum(size, 0.0)
        amplitude = np.divide(size, length, out=np.zeros_like(size), where=shaped)[
            ..., 0
        ]
    rest = data - amplitude[..., None] * weighted
    level = (rest * constant).sum(axis=-1)
    if model.baseline == "nonnegative":
        constant = np.where(level[..., None] > 0, constant, 0.0)
        level = np.maximum(level, 0.0)
    heights = (constant * root).sum(axis=-1)
    weight = (root**2).sum(axis=-1)
    return Projected(
        residual=rest - level[..., None] * constant,
        amplitude=amplitude,
        baseline=level * heights / np.maximum(weight, 1e-300),
        constant=constant,
        along=along,
    )


def _along(vectors: FloatArray, unit: FloatArray) -> FloatArray:
    return np.asarray((vectors * unit).sum(axis=-1, keepdims=True) * unit)


def evaluate(
    model: Model, x: FloatArray, shared: FloatArray, local: FloatArray
) -> FloatArray:
    """Return the function, shape (n_problems, n_sites, n_points).

    Parameters
    ----------
    model : Model
        Its function is taken.
    x : ndarray, shape (n_points,)
        In the base unit.
    shared : ndarray, shape (n_problems, 2)
        Positions of shared parameter and companion.
    local : ndarray, shape (n_problems, n_sites)
        Positions of the parameters of the sites.

    Returns
    -------
    ndarray of float
        The function, shape (n_problems, n_sites, n_points).
    """
    arguments = [from_axis(shared[:, 0], model.shared)[:, None, None]]
    if model.companion is not None:
        arguments.append(from_axis(shared[:, 1], model.companion)[:, None, None])
    if model.local is not None:
        arguments.append(from_axis(local, model.local)[..., None])
    kernel = np.asarray(model.function(x, *arguments), dtype=np.float64)
    return np.broadcast_to(kernel, (*local.shape, len(x)))


def _bounds(model: Model, x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return limits of the shared axes, shape (2, 2), and of the local one, (2,)."""
    first, second, local = make_grids(model, x)
    limits = np.array([[first[0], first[-1]], [second[0], second[-1]]])
    return limits, np.array([local[0], local[-1]])


def take(problems: Problems, index: NDArray[np.int64] | NDArray[np.bool_]) -> Problems:
    """Return some of the problems.

    Parameters
    ----------
    problems : Problems
        All of them.
    index : ndarray of int or bool
        Which.

    Returns
    -------
    Problems
        In the order of the index.
    """
    return Problems(
        value=problems.value[index],
        root_weight=problems.root_weight[index],
        shared=problems.shared[index],
        local=problems.local[index],
        chi2=problems.chi2[index],
    )


def make_grids(model: Model, x: FloatArray) -> Grids:
    """Return the nodes of shared, companion and local parameter on their axes.

    Parameters
    ----------
    model : Model
        Says which there are.
    x : ndarray, shape (n_points,)
        In the base unit.

    Returns
    -------
    tuple of ndarray
        A single 0 stands for a parameter that the model lacks.
    """
    axes = []
    for parameter in (model.shared, model.companion, model.local):
        nodes = np.zeros(1)
        if parameter is not None:
            nodes = to_axis(parameter.grid(x), parameter)
        axes.append(nodes)
    return axes[0], axes[1], axes[2]
