"""Where the fits of models with several nonlinear parameters start."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.damped import iterate
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.problems import Grids, Problems, evaluate, project, take
from structmap.one_process.profiles import Profiles
from structmap.one_process.search import parabola_minimum

_STARTS = 5
FIXED_ROUNDS, _POLISHING_ROUNDS = 20, 400
NODES_CLOSE = 1e-6


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Coarse:
    """Misfits on the grid of shared, companion and local parameters.

    Attributes
    ----------
    grids : tuple of ndarray
        The nodes.
    chi2 : ndarray of float, shape (n_sites, n_nodes * n_companion)
        The lowest misfit over the local nodes.
    place : ndarray of int, shape (n_sites, n_nodes * n_companion)
        At which of them it is.
    """

    grids: Grids
    chi2: FloatArray
    place: NDArray[np.int64]

    def start(
        self, node: NDArray[np.int64], place: NDArray[np.int64]
    ) -> tuple[FloatArray, FloatArray]:
        """Return positions of nodes.

        Parameters
        ----------
        node : ndarray of int
            Flat index of shared parameter and companion.
        place : ndarray of int
            Local nodes.

        Returns
        -------
        shared : ndarray of float
            Positions on the axes of shared parameter and companion.
        local : ndarray of float
            Positions on the axis of the local parameter.
        """
        axis, companion, local = self.grids
        first, second = np.divmod(node, len(companion))
        return np.column_stack([axis[first], companion[second]]), local[place]

    @property
    def shape(self) -> tuple[int, int, int]:
        """Return numbers of sites, nodes and companion nodes.

        Returns
        -------
        tuple of int
            Numbers of sites, nodes and companion nodes.
        """
        return len(self.chi2), len(self.grids[0]), len(self.grids[1])


def fit_group_best(model: Model, profiles: Profiles, coarse: Coarse) -> Problems:
    """Return the best fit of the group.

    Parameters
    ----------
    model : Model
        What is fitted.
    profiles : Profiles
        Of one group.
    coarse : Coarse
        Gives the starting points.

    Returns
    -------
    Problems
        One problem.
    """
    order = np.argsort(coarse.chi2.sum(axis=0), kind="stable")[:_STARTS]
    start = coarse.start(order, coarse.place[:, order].T)
    found = iterate(
        model,
        profiles.x,
        _group_problems(profiles, *start),
    )
    best = take(found, np.array([int(found.chi2.argmin())]))
    # A valley towards equal populations is flat: the winner alone may go on.
    return iterate(model, profiles.x, best, rounds=_POLISHING_ROUNDS)


def fit_group_nodes(model: Model, profiles: Profiles, coarse: Coarse) -> Problems:
    """Return the best fits of the group at all nodes.

    Parameters
    ----------
    model : Model
        What is fitted.
    profiles : Profiles
        Of one group.
    coarse : Coarse
        Gives the starting points.

    Returns
    -------
    Problems
        A problem a node.
    """
    _, n_nodes, n_companion = coarse.shape
    total = coarse.chi2.sum(axis=0).reshape(n_nodes, n_companion)
    node = np.arange(n_nodes) * n_companion + total.argmin(axis=1)
    start = coarse.start(node, coarse.place[:, node].T)
    problems = _group_problems(profiles, *start)
    return iterate(
        model,
        profiles.x,
        problems,
        tolerance=NODES_CLOSE,
        rounds=FIXED_ROUNDS,
        fixed=True,
    )


def fit_site_best(model: Model, profiles: Profiles, coarse: Coarse) -> Problems:
    """Return the best fit of each site alone.

    Parameters
    ----------
    model : Model
        What is fitted.
    profiles : Profiles
        Of one group.
    coarse : Coarse
        Gives the starting points.

    Returns
    -------
    Problems
        A problem a site.
    """
    order = np.argsort(coarse.chi2, axis=1, kind="stable")[:, :_STARTS]
    problems = _site_problems(profiles, coarse, order)
    found = iterate(model, profiles.x, problems)
    lowest = found.chi2.reshape(order.shape).argmin(axis=1)
    return take(found, np.arange(len(order)) * order.shape[1] + lowest)


def fit_site_nodes(model: Model, profiles: Profiles, coarse: Coarse) -> Problems:
    """Return the best fits of each site alone at all nodes.

    Parameters
    ----------
    model : Model
        What is fitted.
    profiles : Profiles
        Of one group.
    coarse : Coarse
        Gives the starting points.

    Returns
    -------
    Problems
        Site by site, a problem a node.
    """
    n_sites, n_nodes, n_companion = coarse.shape
    table = coarse.chi2.reshape(n_sites, n_nodes, n_companion)
    node = np.arange(n_nodes) * n_companion + table.argmin(axis=2)
    problems = _site_problems(profiles, coarse, node)
    return iterate(
        model,
        profiles.x,
        problems,
        tolerance=NODES_CLOSE,
        rounds=FIXED_ROUNDS,
        fixed=True,
    )


def _group_problems(
    profiles: Profiles, shared: FloatArray, local: FloatArray
) -> Problems:
    shape = (len(shared), *profiles.value.shape)
    return Problems(
        value=np.broadcast_to(profiles.filled, shape),
        root_weight=np.broadcast_to(profiles.root_weight, shape),
        shared=shared,
        local=local,
        chi2=np.full(len(shared), np.inf),
    )


def _site_problems(
    profiles: Profiles, coarse: Coarse, node: NDArray[np.int64]
) -> Problems:
    """Return problems of one site each, several flat nodes a site."""
    place = np.take_along_axis(coarse.place, node, axis=1)
    shared, local = coarse.start(node.ravel(), place.reshape(-1, 1))
    each = node.shape[1]
    return Problems(
        value=np.repeat(profiles.filled, each, axis=0)[:, None],
        root_weight=np.repeat(profiles.root_weight, each, axis=0)[:, None],
        shared=shared,
        local=local,
        chi2=np.full(len(shared), np.inf),
    )


def make_coarse(model: Model, profiles: Profiles, grids: Grids) -> Coarse:
    """Return the misfits of all sites on a coarse grid of all parameters.

    Parameters
    ----------
    model : Model
        What is fitted.
    profiles : Profiles
        Of one group.
    grids : tuple of ndarray
        Nodes of shared parameter, companion and local parameter.

    Returns
    -------
    Coarse
        Starting points.
    """
    axis, companion, local = grids
    n_sites, n_points = profiles.value.shape
    chi2 = np.empty((n_sites, len(axis), len(companion)))
    place = np.empty(chi2.shape, dtype=np.int64)
    shape = (n_sites, len(companion) * len(local), n_points)
    problems = Problems(
        value=np.broadcast_to(profiles.filled[:, None], shape),
        root_weight=np.broadcast_to(profiles.root_weight[:, None], shape),
        shared=np.zeros((n_sites, 2)),
        local=np.zeros(shape[:2]),
        chi2=np.full(n_sites, np.inf),
    )
    each = np.tile(local, (len(companion), 1))
    for row, at in enumerate(axis):
        shared = np.column_stack([np.full(len(companion), at), companion])
        kernel = evaluate(model, profiles.x, shared, each).reshape(1, *shape[1:])
        rest = project(model, problems, np.broadcast_to(kernel, shape)).residual
        found = (rest**2).sum(axis=-1).reshape(n_sites, len(companion), len(local))
        place[:, row] = found.argmin(axis=2)
        chi2[:, row] = parabola_minimum(found[..., None])[..., 0]
    flat = (n_sites, -1)
    return Coarse(grids=grids, chi2=chi2.reshape(flat), place=place.reshape(flat))
