"""Whether a whole molecule follows one process, or how many, and where."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.engine import Solver, make_solver
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.profiles import Profiles
from structmap.one_process.search import from_axis
from structmap.records import store_read_only

_ROUNDS, _STARTS = 50, 8
_FOLDS = 4


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Mixture:
    """A few shared values and the sites that follow each.

    Attributes
    ----------
    values : ndarray of float, shape (n_values,)
        Rising shared values, in the unit of the model's parameter.
    member : ndarray of int, shape (n_sites,)
        Which value each site follows.
    probability : ndarray of float, shape (n_sites,)
        That it follows this value and none of the others, at the stated errors.
    chi2 : float
        Misfit with these values.
    held_out : ndarray of float, shape (n_tried,)
        Misfit of points held out, per point, for 1, 2, … values.
    held_out_error : ndarray of float, shape (n_tried,)
        Standard error of its excess over the lowest.
    """

    values: NDArray[np.float64]
    member: NDArray[np.int64]
    probability: NDArray[np.float64]
    chi2: float
    held_out: NDArray[np.float64]
    held_out_error: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "values", np.float64, (None,))
        store_read_only(self, "member", np.int64, (None,))
        store_read_only(self, "probability", np.float64, (len(self.member),))
        store_read_only(self, "held_out", np.float64, (None,))
        store_read_only(self, "held_out_error", np.float64, (len(self.held_out),))


def find_mixture(
    profiles: Profiles, model: Model, *, rng: np.random.Generator, most: int = 5
) -> Mixture:
    """Return how many shared values a molecule needs, and which site follows which.

    Parameters
    ----------
    profiles : Profiles
        Of all informative sites.
    model : Model
        What is fitted.
    rng : numpy.random.Generator
        Starts of the search and the folds.
    most : int, optional
        Most values tried.

    Returns
    -------
    Mixture
        With the smallest number of values whose misfit of held-out points lies within
        one standard error of the lowest.

    Raises
    ------
    ValueError
        If there is no site.

    Notes
    -----
    Each site is assigned to the value that fits it best, and each value is the best one
    for its sites, until nothing changes. For the cross-validation the points of each
    site are dealt into four folds; values, assignment, baselines and amplitudes come
    from the other three.
    """
    if not profiles.name:
        raise ValueError("profiles holds no site")
    solver = make_solver(model, profiles)
    tried = min(most, len(profiles.name))
    scores = _held_out(profiles, model, tried, rng=rng)
    total = scores.sum(axis=1)
    points = int(profiles.present.sum())
    lowest = int(total.argmin())
    excess = scores - scores[lowest]
    error = excess.std(axis=1, ddof=1) * np.sqrt(scores.shape[1])
    within = total - total[lowest] <= error
    number = int(within.argmax()) + 1
    nodes, member = _cluster(solver.site_profile, number, rng=rng)
    chances = _membership(solver.site_profile, nodes)
    return Mixture(
        values=from_axis(solver.nodes[nodes], model.shared),
        member=member,
        probability=chances[np.arange(len(member)), member],
        chi2=float(solver.site_profile[np.arange(len(member)), nodes[member]].sum()),
        held_out=total / points,
        held_out_error=error / points,
    )


def _held_out(
    profiles: Profiles, model: Model, tried: int, *, rng: np.random.Generator
) -> FloatArray:
    """Return misfits of held-out points, shape (n_tried, n_sites)."""
    n_sites, n_points = profiles.value.shape
    fold = rng.permuted(np.tile(np.arange(n_points) % _FOLDS, (n_sites, 1)), axis=1)
    scores = np.zeros((tried, n_sites))
    for number in range(_FOLDS):
        held = fold == number
        value = np.where(held, np.nan, profiles.value)
        training = replace(profiles, value=value)
        solver = make_solver(model, training)
        for count in range(1, tried + 1):
            scores[count - 1] += _score(solver, profiles, held, count, rng=rng)
    return scores


def _score(
    solver: Solver,
    profiles: Profiles,
    held: NDArray[np.bool_],
    count: int,
    *,
    rng: np.random.Generator,
) -> FloatArray:
    nodes, member = _cluster(solver.site_profile, count, rng=rng)
    fitted = solver.fitted_at_nodes(nodes[member])
    off = np.where(held & profiles.present, profiles.value - fitted, 0.0)
    return np.asarray(((off * profiles.root_weight) ** 2).sum(axis=1))


def _cluster(
    table: FloatArray, count: int, *, rng: np.random.Generator
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return rising nodes and the one that each site follows."""
    best: tuple[float, NDArray[np.int64]] | None = None
    free = np.sort(table.argmin(axis=1))
    even = free[((np.arange(count) + 0.5) / count * len(free)).astype(int)]
    starts = [even] + [rng.choice(free, size=count) for _ in range(_STARTS)]
    for start in starts:
        nodes = _improve(table, start)
        cost = float(table[:, nodes].min(axis=1).sum())
        if best is None or cost < best[0] - 1e-9:
            best = cost, nodes
    nodes = np.unique(best[1] if best else even)
    member = table[:, nodes].argmin(axis=1)
    used = np.unique(member)
    return nodes[used], np.searchsorted(used, member)


def _improve(table: FloatArray, start: NDArray[np.int64]) -> NDArray[np.int64]:
    nodes = start.copy()
    for _ in range(_ROUNDS):
        member = table[:, nodes].argmin(axis=1)
        fresh = nodes.copy()
        for index in range(len(nodes)):
            if (member == index).any():
                fresh[index] = table[member == index].sum(axis=0).argmin()
        if np.array_equal(fresh, nodes):
            break
        nodes = fresh
    return nodes


def _membership(table: FloatArray, nodes: NDArray[np.int64]) -> FloatArray:
    likelihood = -0.5 * table[:, nodes]
    likelihood = np.exp(likelihood - likelihood.max(axis=1, keepdims=True))
    return np.asarray(likelihood / likelihood.sum(axis=1, keepdims=True))
