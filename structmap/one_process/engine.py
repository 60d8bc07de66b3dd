"""Fitting any model record to a group of profiles; knows no physics."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.one_process.compound import CompoundSolver, make_compound_solver
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.profiles import (
    STATED_LIMIT,
    GroupFit,
    Profiles,
    interval_rise,
    make_profiles,
)
from structmap.one_process.search import from_axis
from structmap.one_process.simple import SimpleSolver, State, make_simple_solver

_CURVE_POINTS = 121
_STEP = 1e-4
_ROBUST_LIMIT, _ROBUST_ROUNDS = 2.5, 8

Solver = SimpleSolver | CompoundSolver


def make_solver(model: Model, profiles: Profiles) -> Solver:
    """Return what solves a model on the profiles of a group.

    Parameters
    ----------
    model : Model
        Any record.
    profiles : Profiles
        Of one group.

    Returns
    -------
    SimpleSolver or CompoundSolver
        The second where the model has companion or local parameters.
    """
    if model.companion is None and model.local is None:
        return make_simple_solver(model, profiles)
    return make_compound_solver(model, profiles)


def fit_group(
    x: ArrayLike,
    values: ArrayLike,
    errors: ArrayLike,
    model: Model,
    *,
    name: tuple[str, ...] = (),
    robust: bool = False,
) -> GroupFit:
    """Fit one shared value, and one for each site, to the profiles of a group.

    Parameters
    ----------
    x : array_like, shape (n_points,)
        Where the profiles were measured, in the base unit of the model.
    values : array_like, shape (n_sites, n_points)
        NaN where missing.
    errors : array_like
        Standard errors, broadcast against the values.
    model : Model
        What is fitted.
    name : tuple of str, optional
        Names of the sites.
    robust : bool, optional
        Widen the errors of points beyond 2.5 of them (Huber's weights), so that single
        wild points do not draw the fit.

    Returns
    -------
    GroupFit
        With intervals by profile likelihood, open where the data do not bound them.

    Raises
    ------
    ValueError
        If shapes do not fit, x is not finite or an error is not above 0.

    References
    ----------
    .. [1] Golub and Pereyra, SIAM J. Numer. Anal. 10, 413 (1973).
    """
    profiles = make_profiles(x, values, errors, name=name)
    if robust:
        profiles = widen_wild_errors(profiles, model)
    return describe_fit(make_solver(model, profiles))


def describe_fit(solver: Solver) -> GroupFit:
    """Return the fit of a group, with intervals, curves and residuals.

    Parameters
    ----------
    solver : SimpleSolver or CompoundSolver
        Of the group.

    Returns
    -------
    GroupFit
        Everything a page or a test needs.
    """
    profiles, model = solver.profiles, solver.model
    position, chi2_shared = solver.fit_shared()
    sites, chi2_sites = solver.fit_sites()
    state = solver.state(position)
    points = int(profiles.present.sum())
    freedom = points - model.n_own * len(sites) - model.n_shared
    scale = chi2_shared / freedom if freedom > 0 else 1.0
    rise = interval_rise(chi2_shared, freedom)
    above = np.array([rise, STATED_LIMIT])
    scaled, stated = solver.intervals(position, chi2_shared + above)
    ranges = solver.site_intervals(sites, chi2_sites + STATED_LIMIT)
    fitted = fitted_values(state, state.kernel)
    residual = np.where(profiles.present, profiles.value - fitted, np.nan)
    band = _curves(solver, state, scale)
    axis = model.shared
    return GroupFit(
        model=model,
        profiles=profiles,
        shared=float(_inner(from_axis(position, axis), solver, position)),
        best=float(from_axis(position, axis)),
        low=float(from_axis(scaled[0], axis)),
        high=float(from_axis(scaled[1], axis)),
        low_stated=float(from_axis(stated[0], axis)),
        high_stated=float(from_axis(stated[1], axis)),
        companion=state.companion,
        chi2_shared=chi2_shared,
        chi2_free=min(float(chi2_sites.sum()), chi2_shared),
        free=_inner(from_axis(sites, axis), solver, sites),
        free_low=from_axis(ranges[:, 0], axis),
        free_high=from_axis(ranges[:, 1], axis),
        grid=from_axis(solver.nodes, axis),
        grid_chi2=solver.site_profile,
        grid_shared=solver.shared_profile,
        baseline=state.part.baseline[:, 0],
        amplitude=state.part.amplitude,
        local=state.local,
        fitted=fitted,
        residual=residual,
        leverage=state.part.leverage,
        curve_x=band.x,
        curve=band.curve,
        curve_error=band.error,
    )


def fit_each(profiles: Profiles, model: Model) -> GroupFit:
    """Fit sites that have nothing to do with each other, a fast path for many.

    Parameters
    ----------
    profiles : Profiles
        Of any number of sites.
    model : Model
        What is fitted.

    Returns
    -------
    GroupFit
        Its `free` values and intervals are the result.
    """
    return describe_fit(make_solver(model, profiles))


def widen_wild_errors(profiles: Profiles, model: Model) -> Profiles:
    """Widen the errors of wild points until single ones do not draw the fit.

    Parameters
    ----------
    profiles : Profiles
        Of one group.
    model : Model
        What is fitted with one shared value.

    Returns
    -------
    Profiles
        The same values; points beyond 2.5 robust errors of the shared fit have
        errors that grow with the root of that distance.

    References
    ----------
    .. [1] Huber, Ann. Math. Stat. 35, 73 (1964).
    """
    current = profiles
    for _ in range(_ROBUST_ROUNDS):
        solver = make_solver(model, current)
        state = solver.state(solver.fit_shared()[0])
        residual = (
            np.abs(profiles.value - fitted_values(state, state.kernel)) / profiles.error
        )
        scale = max(float(np.nanmedian(residual)) / 0.6745, 1e-12)
        distance = np.nan_to_num(residual) / (scale * _ROBUST_LIMIT)
        current = replace(
            profiles,
            error=profiles.error * np.sqrt(np.maximum(distance, 1.0)),
        )
    return current


@dataclass(frozen=True, slots=True, eq=False)
class _Band:
    x: NDArray[np.float64]
    curve: NDArray[np.float64]
    error: NDArray[np.float64]


def _curves(solver: Solver, state: State, scale: float) -> _Band:
    """Return fitted curves and their errors from linear and shared parameters."""
    x = solver.profiles.x
    fine = np.linspace(x.min(), x.max(), _CURVE_POINTS)
    block = _blocks_at(solver, fine)
    curve = fitted_values(state, solver.kernel_at(state, fine), block=block)
    errors2 = _linear_variance(solver, state, fine)
    step = _STEP * (solver.nodes[-1] - solver.nodes[0])
    inside = solver.nodes[0] + step < state.position < solver.nodes[-1] - step
    if inside:
        around = [solver.state(state.position + side * step) for side in (-1, 1)]
        bend = sum(float(part.part.chi2.sum()) for part in around)
        bend = (bend - 2 * float(state.part.chi2.sum())) / step**2
        lower, upper = (
            fitted_values(part, solver.kernel_at(part, fine), block=block)
            for part in around
        )
        slope = (upper - lower) / (2 * step)
        if bend > 0:
            errors2 = errors2 + slope**2 * 2 / bend
    return _Band(fine, curve, np.sqrt(scale * errors2))


def _linear_variance(solver: Solver, state: State, fine: FloatArray) -> FloatArray:
    """Return the variance of the curves from baseline and amplitude alone."""
    root, kernel = solver.profiles.root_weight, solver.kernel_at(state, fine)
    out, model = np.zeros(kernel.shape), solver.model
    constants, fine_constants = [], []
    for number in range(model.n_baselines if model.baseline != "none" else 0):
        constants.append((state.block == number).astype(np.float64))
        fine_constants.append((_blocks_at(solver, fine) == number).astype(np.float64))
    for site in range(len(root)):
        columns, fine_columns = [*constants], [*fine_constants]
        if model.amplitude != "unit" and state.part.amplitude[site] != 0:
            columns.append(state.kernel[site])
            fine_columns.append(kernel[site])
        if not columns:
            continue
        design = np.stack([root[site] * column for column in columns], axis=1)
        covariance = np.linalg.pinv(design.T @ design)
        fine_design = np.stack(fine_columns, axis=1)
        out[site] = np.einsum("xi,ij,xj->x", fine_design, covariance, fine_design)
    return out


def _blocks_at(solver: Solver, fine: FloatArray) -> NDArray[np.int64]:
    """Return the block at other x: with several blocks x counts the points."""
    if not solver.profiles.block.any():
        return np.zeros(len(fine), dtype=np.int64)
    nearest = np.searchsorted(solver.profiles.x, fine, side="right") - 1
    return np.asarray(solver.profiles.block[np.maximum(nearest, 0)])


def fitted_values(
    state: State, kernel: FloatArray, *, block: NDArray[np.int64] | None = None
) -> FloatArray:
    """Return baseline plus amplitude times kernel.

    Parameters
    ----------
    state : State
        Says baselines and amplitudes.
    kernel : ndarray, shape (n_sites, n)
        The model's function.
    block : ndarray of int, shape (n,), optional
        Which baseline each column has; the default is that of the measured points.

    Returns
    -------
    ndarray, shape (n_sites, n)
        In the unit of the values.
    """
    part = state.part
    which = state.block if block is None else block
    return np.asarray(part.baseline[:, which] + part.amplitude[:, None] * kernel)


def _inner(
    value: FloatArray, solver: Solver, position: float | FloatArray
) -> FloatArray:
    """Return the values, NaN where they lie on an end of the range."""
    place = np.asarray(position)
    ends = (place <= solver.nodes[0]) | (place >= solver.nodes[-1])
    return np.where(ends, np.nan, value)
