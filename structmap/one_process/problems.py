"""Many small fits side by side: where they stand, with baselines projected out."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.model import FloatArray, Model
from structmap.one_process.search import from_axis, to_axis

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


def choose(better: NDArray[np.bool_], new: Problems, old: Problems) -> Problems:
    """Return the new place of problems that got better, the old one of the others.

    Parameters
    ----------
    better : ndarray of bool, shape (n_problems,)
        Which take the new place.
    new, old : Problems
        Both places.

    Returns
    -------
    Problems
        All of them.
    """
    return replace(
        old,
        shared=np.where(better[:, None], new.shared, old.shared),
        local=np.where(better[:, None], new.local, old.local),
        chi2=np.where(better, new.chi2, old.chi2),
    )


def choose_projected(
    better: NDArray[np.bool_], new: Projected, old: Projected
) -> Projected:
    """Return the new linear parts of problems that got better, else the old ones.

    Parameters
    ----------
    better : ndarray of bool, shape (n_problems,)
        Which take the new ones.
    new, old : Projected
        Both.

    Returns
    -------
    Projected
        Of all problems.
    """
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


def find_bounds(model: Model, x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the limits of the axes.

    Parameters
    ----------
    model : Model
        Says which parameters there are.
    x : ndarray, shape (n_points,)
        In the base unit.

    Returns
    -------
    shared : ndarray, shape (2, 2)
        Lowest and highest place of shared parameter and companion.
    local : ndarray, shape (2,)
        Of the parameter of the sites.
    """
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
