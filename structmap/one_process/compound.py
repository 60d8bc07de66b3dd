"""Solving models with a second shared parameter or a nonlinear one at each site.

All fits go through one damped least-squares iteration that runs many problems at once.
A problem is a set of sites with common shared parameters; baselines and amplitudes are
projected out, and the parameter of each site is eliminated from the normal equations,
so that only a two by two system is left for the shared ones.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.damped import iterate
from structmap.one_process.linear import LinearPart
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.problems import (
    Problems,
    evaluate,
    make_grids,
    project,
    take,
)
from structmap.one_process.profiles import Profiles
from structmap.one_process.search import find_intervals, from_axis, to_axis
from structmap.one_process.secant import iterate_by_secants
from structmap.one_process.simple import State
from structmap.one_process.starts import (
    FIXED_ROUNDS,
    NODES_CLOSE,
    fit_group_best,
    fit_group_nodes,
    fit_site_best,
    fit_site_nodes,
    make_coarse,
)

_QUICK_ROUNDS, _SECANT_ROUNDS = 8, 16
_REPLICATES = 1e-4
_CROSSING = 1e-5
_CHUNK = 150_000
"""Points in one batch of problems; more replicates are taken in turns."""


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CompoundSolver:
    """A model with companion or local parameters, on the profiles of a group.

    Attributes
    ----------
    model : Model
    profiles : Profiles
    nodes : ndarray of float, shape (n_nodes,)
        Positions of the grid on the axis of the shared parameter.
    shared_nodes, site_nodes : Problems
        Best fits at the nodes, of the group and of each site alone (site by site).
    best, best_sites : Problems
        Best fits at any position.
    """

    model: Model
    profiles: Profiles
    nodes: NDArray[np.float64]
    shared_nodes: Problems
    site_nodes: Problems
    best: Problems
    best_sites: Problems

    @property
    def site_profile(self) -> FloatArray:
        """Return misfit of each site alone at the nodes, shape (n_sites, n_nodes).

        Returns
        -------
        ndarray of float
            Misfit of each site alone at the nodes, shape (n_sites, n_nodes).
        """
        return self.site_nodes.chi2.reshape(len(self.profiles.name), len(self.nodes))

    @property
    def shared_profile(self) -> FloatArray:
        """Return misfit of all sites at the nodes, shape (n_nodes,).

        Returns
        -------
        ndarray of float
            Misfit of all sites at the nodes, shape (n_nodes,).
        """
        return self.shared_nodes.chi2

    def minima(self, values: FloatArray, start: State) -> tuple[FloatArray, FloatArray]:
        """Return the lowest misfits of many sets of values, shared and free.

        Parameters
        ----------
        values : ndarray, shape (n_sets, n_sites, n_points)
            Sets of values; finite where missing.
        start : State
            Where the searches start.

        Returns
        -------
        shared : ndarray, shape (n_sets,)
            With one value for all sites.
        free : ndarray, shape (n_sets,)
            Summed over the sites alone.
        """
        parts = list(self._parts(values))
        shared = np.concatenate([self._shared_minima(part, start) for part in parts])
        free = np.concatenate([self._free_minima(part, start) for part in parts])
        return shared, np.minimum(free, shared)

    def growth(self, values: FloatArray, start: State) -> FloatArray:
        """Return what one shared value costs sets of values without noise.

        Parameters
        ----------
        values : ndarray, shape (n_sets, n_sites, n_points)
            Values that the model gives at each site exactly.
        start : State
            Where the searches start.

        Returns
        -------
        ndarray, shape (n_sets,)
            The lowest misfits with one value, for those of the sites alone are 0.
        """
        return np.concatenate(
            [self._shared_minima(part, start) for part in self._parts(values)]
        )

    def _parts(self, values: FloatArray) -> Iterator[FloatArray]:
        size = max(1, _CHUNK // values[0].size)
        for first in range(0, len(values), size):
            yield values[first : first + size]

    def _shared_minima(self, values: FloatArray, start: State) -> FloatArray:
        n_sets = len(values)
        group = Problems(
            value=values,
            root_weight=np.broadcast_to(self.profiles.root_weight, values.shape),
            shared=np.tile(_axes(self.model, start), (n_sets, 1)),
            local=np.tile(_local_axis(self.model, start.local), (n_sets, 1)),
            chi2=np.full(n_sets, np.inf),
        )
        return iterate_by_secants(
            self.model,
            self.profiles.x,
            group,
            tolerance=_REPLICATES,
            rounds=_SECANT_ROUNDS,
        ).chi2

    def _free_minima(self, values: FloatArray, start: State) -> FloatArray:
        n_sets, n_sites, n_points = values.shape
        flat = (n_sets * n_sites, 1, n_points)
        root = np.broadcast_to(self.profiles.root_weight, values.shape)
        single = Problems(
            value=values.reshape(flat),
            root_weight=root.reshape(flat),
            shared=np.tile(_axes(self.model, start), (n_sets * n_sites, 1)),
            local=np.tile(_local_axis(self.model, start.local), n_sets)[:, None],
            chi2=np.full(n_sets * n_sites, np.inf),
        )
        found = iterate(
            self.model,
            self.profiles.x,
            single,
            tolerance=_REPLICATES,
            rounds=_QUICK_ROUNDS,
        )
        return np.asarray(found.chi2.reshape(n_sets, n_sites).sum(axis=1))

    def fit_shared(self) -> tuple[float, float]:
        """Return position and misfit of the best shared value.

        Returns
        -------
        tuple[float, float]
            Position and misfit of the best shared value.
        """
        return float(self.best.shared[0, 0]), float(self.best.chi2[0])

    def fit_sites(self) -> tuple[FloatArray, FloatArray]:
        """Return positions and misfits of the sites alone, shape (n_sites,) each.

        Returns
        -------
        tuple[FloatArray, FloatArray]
            Positions and misfits of the sites alone, shape (n_sites,) each.
        """
        return self.best_sites.shared[:, 0], self.best_sites.chi2

    def intervals(self, best: float, limits: FloatArray) -> FloatArray:
        """Return where the shared misfit crosses limits.

        Parameters
        ----------
        best : float
            Position of the lowest misfit.
        limits : ndarray, shape (n_limits,)
            The limits.

        Returns
        -------
        ndarray, shape (n_limits, 2)
            Positions below and above the minimum, NaN at an open end.
        """
        return find_intervals(
            lambda at: self._at(at).chi2,
            self.nodes,
            np.tile(self.shared_profile, (len(limits), 1)),
            best=np.full(len(limits), best),
            limit=limits,
            close=_CROSSING,
        )

    def site_intervals(self, best: FloatArray, limit: FloatArray) -> FloatArray:
        """Return where the misfit of each site crosses its limit.

        Parameters
        ----------
        best, limit : ndarray, shape (n_sites,)
            Positions of the lowest misfits, and the limits.

        Returns
        -------
        ndarray, shape (n_sites, 2)
            Positions, NaN at an open end; interpolated between the nodes.
        """
        table = self.site_profile
        row = np.arange(len(table))

        def between(positions: FloatArray) -> FloatArray:
            lower = np.searchsorted(self.nodes, positions, side="right") - 1
            lower = np.clip(lower, 0, len(self.nodes) - 2)
            width = self.nodes[lower + 1] - self.nodes[lower]
            share = (positions - self.nodes[lower]) / width
            left, right = table[row, lower], table[row, lower + 1]
            return np.asarray(left + share * (right - left))

        return find_intervals(between, self.nodes, table, best=best, limit=limit)

    def state(self, position: float) -> State:
        """Return everything at a position of the shared value.

        Parameters
        ----------
        position : float
            On the axis.

        Returns
        -------
        State
            With companion, local parameters, baselines and amplitudes at their best.
        """
        at_best = position == float(self.best.shared[0, 0])
        solved = self.best if at_best else self._at(np.array([position]))
        kernel = evaluate(self.model, self.profiles.x, solved.shared, solved.local)
        projected = project(self.model, solved, kernel)
        companion = self.model.companion
        return State(
            position=position,
            companion=float(from_axis(solved.shared[0, 1], companion))
            if companion
            else float("nan"),
            local=_from_local_axis(self.model, solved.local[0]),
            kernel=kernel[0],
            part=LinearPart(
                baseline=projected.baseline[0][:, None],
                amplitude=projected.amplitude[0],
                chi2=(projected.residual[0] ** 2).sum(axis=-1),
                leverage=projected.constant[0] ** 2 + projected.along[0] ** 2,
            ),
            block=self.profiles.block,
        )

    def kernel_at(self, state: State, x: FloatArray) -> FloatArray:
        """Return the model's function of all sites at other x.

        Parameters
        ----------
        state : State
            Says the parameters.
        x : ndarray, shape (n,)
            In the base unit.

        Returns
        -------
        ndarray, shape (n_sites, n)
            Without baseline and amplitude.
        """
        place = _axes(self.model, state)
        local = _local_axis(self.model, state.local)
        return np.asarray(evaluate(self.model, x, place, local[None])[0])

    def moved(self, state: State, shifts: FloatArray) -> FloatArray:
        """Return the fitted values with the shared value moved at each site.

        Parameters
        ----------
        state : State
            Says the other parameters.
        shifts : ndarray, shape (n_sets, n_sites)
            Moves along the axis.

        Returns
        -------
        ndarray, shape (n_sets, n_sites, n_points)
            Values without noise.
        """
        place = np.tile(_axes(self.model, state), (shifts.size, 1))
        low, high = self.nodes[0], self.nodes[-1]
        place[:, 0] = np.clip(place[:, 0] + shifts.ravel(), low, high)
        local = np.tile(_local_axis(self.model, state.local), len(shifts))[:, None]
        kernel = evaluate(self.model, self.profiles.x, place, local)
        kernel = kernel.reshape(*shifts.shape, -1)
        part = state.part
        return np.asarray(part.baseline + part.amplitude[:, None] * kernel)

    def fitted_at_nodes(self, node: NDArray[np.int64]) -> FloatArray:
        """Return the fits of the sites alone, each at a node of its own.

        Parameters
        ----------
        node : ndarray of int, shape (n_sites,)
            Indices into `nodes`.

        Returns
        -------
        ndarray, shape (n_sites, n_points)
            Fitted values, also where a value is missing.
        """
        solved = take(self.site_nodes, np.arange(len(node)) * len(self.nodes) + node)
        kernel = evaluate(self.model, self.profiles.x, solved.shared, solved.local)
        part = project(self.model, solved, kernel)
        fitted = part.baseline[..., None] + part.amplitude[..., None] * kernel
        return np.asarray(fitted[:, 0])

    def _at(self, positions: FloatArray) -> Problems:
        """Return the best fits of the group at given positions."""
        nearest = np.abs(self.nodes - positions[:, None]).argmin(axis=1)
        start = take(self.shared_nodes, nearest)
        return self._fixed(start, positions)

    def _fixed(self, start: Problems, positions: FloatArray) -> Problems:
        shared = np.column_stack([positions, start.shared[:, 1]])
        moved = replace(start, shared=shared)
        return iterate(
            self.model,
            self.profiles.x,
            moved,
            tolerance=NODES_CLOSE,
            rounds=FIXED_ROUNDS,
            fixed=True,
        )


def make_compound_solver(model: Model, profiles: Profiles) -> CompoundSolver:
    """Return the solver of a model with companion or local parameters.

    Parameters
    ----------
    model : Model
        With a companion, a local parameter, or both.
    profiles : Profiles
        Of one group.

    Returns
    -------
    CompoundSolver
        With the best fits, and those at all nodes.

    Raises
    ------
    ValueError
        If the profiles have several blocks, each with a baseline of its own.

    Notes
    -----
    A coarse grid over all parameters gives starting points; the best five of the group
    and of each site are refined.
    """
    if profiles.block.any():
        raise ValueError(f"block holds several numbers; {model.name} takes one")
    grids = make_grids(model, profiles.x)
    coarse = make_coarse(model, profiles, grids)
    return CompoundSolver(
        model=model,
        profiles=profiles,
        nodes=grids[0],
        shared_nodes=fit_group_nodes(model, profiles, coarse),
        site_nodes=fit_site_nodes(model, profiles, coarse),
        best=fit_group_best(model, profiles, coarse),
        best_sites=fit_site_best(model, profiles, coarse),
    )


def _axes(model: Model, state: State) -> FloatArray:
    companion = 0.0
    if model.companion is not None:
        companion = float(to_axis(state.companion, model.companion))
    return np.array([[state.position, companion]])


def _local_axis(model: Model, local: FloatArray) -> FloatArray:
    return np.zeros(len(local)) if model.local is None else to_axis(local, model.local)


def _from_local_axis(model: Model, local: FloatArray) -> FloatArray:
    if model.local is None:
        return np.full(len(local), np.nan)
    return from_axis(local, model.local)
