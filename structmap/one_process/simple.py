"""Solving models whose only nonlinear parameter is the shared one."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.linear import (
    Basis,
    LinearPart,
    make_basis,
    node_chi2,
    solve_linear,
)
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.profiles import Profiles
from structmap.one_process.search import (
    find_intervals,
    from_axis,
    parabola_minimum,
    refine_minima,
    to_axis,
)

_CHUNK = 300_000
"""Numbers in one table of misfits, few enough for the cache of a processor."""


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class State:
    """The group at one value of the shared parameter.

    Attributes
    ----------
    position : float
        On the axis of the shared parameter.
    companion : float
        The second shared value; NaN for models without.
    local : ndarray of float, shape (n_sites,)
        The nonlinear values of the sites; NaN for models without.
    kernel : ndarray of float, shape (n_sites, n_points)
        The model's function.
    part : LinearPart
        Baselines, amplitudes, misfits and leverages.
    block : ndarray of int, shape (n_points,)
        Which baseline each point has.
    """

    position: float
    companion: float
    local: NDArray[np.float64]
    kernel: NDArray[np.float64]
    part: LinearPart
    block: NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SimpleSolver:
    """A model without companion and local parameters, on the profiles of a group.

    Attributes
    ----------
    model : Model
    profiles : Profiles
    nodes : ndarray of float, shape (n_nodes,)
        Positions of the grid on the axis.
    basis : Basis
        Kernels at the nodes.
    site_profile : ndarray of float, shape (n_sites, n_nodes)
        Misfit of each site at the nodes.
    """

    model: Model
    profiles: Profiles
    nodes: NDArray[np.float64]
    basis: Basis
    site_profile: NDArray[np.float64]

    @property
    def shared_profile(self) -> FloatArray:
        """Return misfit of all sites at the nodes, shape (n_nodes,).

        Returns
        -------
        ndarray of float
            Misfit of all sites at the nodes, shape (n_nodes,).
        """
        return np.asarray(self.site_profile.sum(axis=0))

    def minima(self, values: FloatArray, start: State) -> tuple[FloatArray, FloatArray]:
        """Return the lowest misfits of many sets of values, shared and free.

        Parameters
        ----------
        values : ndarray, shape (n_sets, n_sites, n_points)
            Sets of values; finite where missing.
        start : State
            Unused: the grid finds the minima.

        Returns
        -------
        shared : ndarray, shape (n_sets,)
            With one value for all sites.
        free : ndarray, shape (n_sets,)
            Summed over the sites alone.
        """
        del start
        n_sites, n_nodes = self.site_profile.shape
        n_sets = max(1, _CHUNK // (n_sites * n_nodes))
        shared, free = [], []
        for first in range(0, len(values), n_sets):
            table = node_chi2(self.basis, values[first : first + n_sets])
            shared.append(parabola_minimum(table.sum(axis=0)))
            free.append(parabola_minimum(table).sum(axis=0))
        return np.concatenate(shared), np.concatenate(free)

    def growth(self, values: FloatArray, start: State) -> FloatArray:
        """Return what one shared value costs sets of values without noise.

        Parameters
        ----------
        values : ndarray, shape (n_sets, n_sites, n_points)
            Sets of values; finite where missing.
        start : State
            Unused: the grid finds the minima.

        Returns
        -------
        ndarray, shape (n_sets,)
            Misfit with one value less that of the sites alone.
        """
        shared, free = self.minima(values, start)
        return np.asarray(np.maximum(shared - free, 0.0))

    def fit_shared(self) -> tuple[float, float]:
        """Return position and misfit of the best shared value.

        Returns
        -------
        tuple[float, float]
            Position and misfit of the best shared value.
        """
        table = self.shared_profile[None]
        position, chi2 = refine_minima(self.shared_misfits, self.nodes, table)
        return float(position[0]), float(chi2[0])

    def fit_sites(self) -> tuple[FloatArray, FloatArray]:
        """Return positions and misfits of the sites alone, shape (n_sites,) each.

        Returns
        -------
        tuple[FloatArray, FloatArray]
            Positions and misfits of the sites alone, shape (n_sites,) each.
        """
        return refine_minima(self.site_misfits, self.nodes, self.site_profile)

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
            self.shared_misfits,
            self.nodes,
            np.tile(self.shared_profile, (len(limits), 1)),
            best=np.full(len(limits), best),
            limit=limits,
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
            Positions, NaN at an open end.
        """
        table = self.site_profile
        return find_intervals(
            self.site_misfits, self.nodes, table, best=best, limit=limit
        )

    def shared_misfits(self, positions: FloatArray) -> FloatArray:
        """Return the misfit of all sites at positions of the shared value.

        Parameters
        ----------
        positions : ndarray, shape (k,)
            On the axis.

        Returns
        -------
        ndarray, shape (k,)
            Chi-square.
        """
        value = from_axis(positions[:, None], self.model.shared)
        kernel = self.model.function(self.profiles.x, value)
        basis = self._basis(kernel)
        table = node_chi2(basis, self.profiles.filled[None])
        return np.asarray(table[..., 0].sum(axis=0))

    def site_misfits(self, positions: FloatArray) -> FloatArray:
        """Return the misfit of each site at a position of its own.

        Parameters
        ----------
        positions : ndarray, shape (n_sites,)
            On the axis.

        Returns
        -------
        ndarray, shape (n_sites,)
            Chi-square.
        """
        value = from_axis(positions[:, None], self.model.shared)
        kernel = self.model.function(self.profiles.x, value)[:, None]
        basis = self._basis(kernel)
        return node_chi2(basis, self.profiles.filled[None])[:, 0, 0]

    def state(self, position: float) -> State:
        """Return baselines and amplitudes at a position of the shared value.

        Parameters
        ----------
        position : float
            On the axis.

        Returns
        -------
        State
            With everything that belongs to it.
        """
        kernel = self._kernel(position, self.profiles.x)
        basis = self._basis(kernel[None])
        n_sites = len(self.profiles.name)
        return State(
            position=position,
            companion=float("nan"),
            local=np.full(n_sites, np.nan),
            kernel=np.tile(kernel, (n_sites, 1)),
            part=solve_linear(basis, self.profiles.filled),
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
        return np.tile(self._kernel(state.position, x), (len(self.profiles.name), 1))

    def moved(self, state: State, shifts: FloatArray) -> FloatArray:
        """Return the fitted values with the shared value moved at each site.

        Parameters
        ----------
        state : State
            Says amplitudes and baselines.
        shifts : ndarray, shape (n_sets, n_sites)
            Moves along the axis.

        Returns
        -------
        ndarray, shape (n_sets, n_sites, n_points)
            Values without noise.
        """
        value = from_axis(state.position + shifts[..., None], self.model.shared)
        kernel = self.model.function(self.profiles.x, value)
        part = state.part
        return np.asarray(
            part.baseline[:, self.profiles.block] + part.amplitude[:, None] * kernel
        )

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
        value = from_axis(self.nodes[node][:, None], self.model.shared)
        kernel = np.asarray(self.model.function(self.profiles.x, value))
        basis = self._basis(kernel[:, None])
        part = solve_linear(basis, self.profiles.filled)
        return np.asarray(
            part.baseline[:, self.profiles.block] + part.amplitude[:, None] * kernel
        )

    def _basis(self, kernel: FloatArray) -> Basis:
        root, block = self.basis.root_weight, self.profiles.block
        return make_basis(kernel, root, self.model, block=block)

    def _kernel(self, position: float, x: FloatArray) -> FloatArray:
        value = from_axis(np.array([position]), self.model.shared)
        kernel = np.asarray(self.model.function(x, value), dtype=np.float64)
        return kernel.reshape(len(x))


def make_simple_solver(model: Model, profiles: Profiles) -> SimpleSolver:
    """Return the solver of a model whose only nonlinear parameter is shared.

    Parameters
    ----------
    model : Model
        Without companion and local parameters.
    profiles : Profiles
        Of one group.

    Returns
    -------
    SimpleSolver
        With the misfits at all nodes.

    Raises
    ------
    ValueError
        If the function does not give one value a node and point.
    """
    grid = model.shared.grid(profiles.x)
    kernel = np.asarray(model.function(profiles.x, grid[:, None]), dtype=np.float64)
    if kernel.shape != (len(grid), len(profiles.x)):
        wanted = (len(grid), len(profiles.x))
        raise ValueError(f"function of {model.name} gives {kernel.shape}, not {wanted}")
    basis = make_basis(kernel, profiles.root_weight, model, block=profiles.block)
    return SimpleSolver(
        model=model,
        profiles=profiles,
        nodes=to_axis(grid, model.shared),
        basis=basis,
        site_profile=node_chi2(basis, profiles.filled[None])[..., 0],
    )
