"""The test whether one value of the parameter explains a group of sites."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv

from structmap.one_process.bootstrap import (
    BORDER,
    Detectable,
    Freedom,
    Replicates,
    find_detectable,
    make_replicates,
)
from structmap.one_process.engine import Solver, describe_fit, make_solver
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.profiles import GroupFit, Profiles, find_flat_sites
from structmap.one_process.reference import (
    Reference,
    find_reference_p,
    find_wild_points,
)
from structmap.one_process.search import parabola_minimum, to_axis

Verdict = Literal["shared", "distinct", "shared by a subset", "undetermined"]

LEAST_SITES = 3
_CLEARLY_DISTINCT = 1e-3
_LINEAR_SHARE = 0.25
_SCALE_TAIL = 0.005


@dataclass(frozen=True, slots=True, kw_only=True)
class TestOptions:
    """Choices of the test.

    Attributes
    ----------
    n_replicates, n_border : int
        Replicates of each bootstrap, and where a p lies between 0.03 and 0.08.
    alpha : float
        Level of the test.
    largest_ratio : float
        With a larger detectable ratio nothing is called shared; for parameters on a
        linear scale a quarter of the range of x takes its place.
    errors_trusted : bool
        The stated errors are known to be right: the parametric p decides alone.
    descriptive : bool
        The group was formed on the same profiles, so that the verdict confirms
        nothing.
    n_reference : int
        Random groups that the result is compared with.
    """

    __test__ = False

    n_replicates: int = 999
    n_border: int = 9999
    alpha: float = 0.05
    largest_ratio: float = 2.0
    errors_trusted: bool = False
    descriptive: bool = False
    n_reference: int = 999


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class OneProcess:
    """Whether one process explains a group.

    Attributes
    ----------
    group : str
        Name of the group.
    sites, flat, too_short : tuple of str
        All its sites; those that a constant explains; those with too few points.
    model, parameter, unit : str
        What was fitted, and the shared parameter.
    fit : GroupFit or None
        Of the informative sites (of all where none is); None where nothing could be
        fitted.
    kept_fit : GroupFit or None
        Fit of the sites that share one value where others are set apart.
    value, low, high : float
        Shared value with its 95 % interval, NaN at an open end. For a subset it is
        the subset's.
    verdict : {'shared', 'distinct', 'shared by a subset', 'undetermined'}
    reason : str
        Why it is undetermined; blank otherwise.
    p_parametric, p_wild : float
        Chances of such a difference under one value.
    n_replicates : int
        Replicates behind them.
    p_adjusted : float
        Holm's, over the groups tested together; shown, never used.
    statistic, error_scale : float
        F, and the scatter in squared stated errors.
    error_note : str
        What the scatter says about the stated errors; blank where they fit.
    detectable : Detectable or None
        How different sites could be and still pass.
    reference_p : float
        How often groups of the same size outside it agree as well; NaN unknown.
    apart : tuple of str
        Sites removed to reach a subset that shares.
    worst : tuple of str
        Points far off the fit, one phrase each, the worst first.
    descriptive : bool
        The verdict describes a group formed on the same profiles.
    points_left_out : tuple of str
        Reasons of points left out, one phrase a point.
    notes : tuple of str
        What else a reader must know, one sentence each.
    """

    group: str
    sites: tuple[str, ...]
    flat: tuple[str, ...]
    too_short: tuple[str, ...]
    model: str
    parameter: str
    unit: str
    fit: GroupFit | None
    kept_fit: GroupFit | None = None
    value: float = float("nan")
    low: float = float("nan")
    high: float = float("nan")
    verdict: Verdict = "undetermined"
    reason: str = ""
    p_parametric: float = float("nan")
    p_wild: float = float("nan")
    n_replicates: int = 0
    p_adjusted: float = float("nan")
    statistic: float = float("nan")
    error_scale: float = float("nan")
    error_note: str = ""
    detectable: Detectable | None = None
    reference_p: float = float("nan")
    apart: tuple[str, ...] = ()
    worst: tuple[str, ...] = ()
    descriptive: bool = False
    points_left_out: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def p_distinct(self) -> float:
        """Return the larger of the two chances: both must be small for `distinct`.

        Returns
        -------
        float
            The larger of the two chances: both must be small for `distinct`.
        """
        chances = [p for p in (self.p_parametric, self.p_wild) if np.isfinite(p)]
        return max(chances, default=float("nan"))

    @property
    def detectable_ratio(self) -> float:
        """Return smallest ratio between two halves that the test sees; NaN unknown.

        Returns
        -------
        float
            Smallest ratio between two halves that the test sees; NaN unknown.
        """
        return self.detectable.split if self.detectable else float("nan")


def judge_group(
    profiles: Profiles,
    model: Model,
    *,
    rng: np.random.Generator,
    options: TestOptions | None = None,
    reference: Reference | None = None,
    caution: NDArray[np.bool_] | None = None,
) -> OneProcess:
    """Say whether one value of the model's parameter explains a group of sites.

    Parameters
    ----------
    profiles : Profiles
        Of the group, with points left out already taken out. A measured site counts
        once, however many copies of it the group holds.
    model : Model
        What is fitted.
    rng : numpy.random.Generator
        Draws replicates and random groups.
    options : TestOptions, optional
        Replicates, level and the like.
    reference : Reference, optional
        Sites outside the group.
    caution : ndarray of bool, shape (n_points,), optional
        Points that are kept only with caution: the verdict must be the same without.

    Returns
    -------
    OneProcess
        With verdict and all that it rests on.

    Notes
    -----
    The misfit with one value is compared with that of a value for each site by F, whose
    law is taken from two bootstraps: with the stated errors, and with the residuals of
    the shared fit, scaled for their leverage, with random signs (robust against errors
    of wrong shape). Sites that a constant explains are left out: they agree with
    everything. `distinct` needs both chances below alpha; `shared` needs both above it
    and proof that the data could have told, which is a closed interval and a small
    detectable ratio. Information criteria do not enter: their implied level falls from
    0.09 to 0.0002 between 2 and 20 sites.
    """
    choice = options or TestOptions()
    first = _judge_all_points(profiles, model, rng=rng, options=choice)
    if caution is not None and np.any(caution):
        first = _judge_without(
            profiles, model, caution, rng=rng, options=choice, first=first
        )
    if reference and first.fit and np.isfinite(first.p_parametric):
        chance = find_reference_p(
            first.fit, reference, n_sets=choice.n_reference, rng=rng
        )
        first = replace(first, reference_p=chance)
    return first


def _judge_without(
    profiles: Profiles,
    model: Model,
    caution: NDArray[np.bool_],
    *,
    rng: np.random.Generator,
    options: TestOptions,
    first: OneProcess,
) -> OneProcess:
    """Judge again without the points of caution, and compare the verdicts."""
    second = _judge_all_points(
        profiles.take_points(~caution), model, rng=rng, options=options
    )
    if second.verdict == first.verdict:
        return first
    reason = (
        f"points to be taken with caution decide: {first.verdict} with them, "
        f"{second.verdict} without"
    )
    return replace(first, verdict="undetermined", reason=reason, apart=())


def _judge_all_points(
    profiles: Profiles, model: Model, *, rng: np.random.Generator, options: TestOptions
) -> OneProcess:
    enough = profiles.present.sum(axis=1) >= max(model.min_points, model.n_own + 1)
    flat = np.zeros(len(enough), dtype=bool)
    if model.baseline != "none":
        flat = find_flat_sites(profiles) & enough
    useful = enough & ~flat
    shown = useful if useful.any() else enough
    names = np.array(profiles.name, dtype=object)
    fit = None
    if shown.any():
        solver = make_solver(model, profiles.take(shown))
        fit = describe_fit(solver)
    result = OneProcess(
        group="all",
        sites=profiles.name,
        flat=tuple(names[flat]),
        too_short=tuple(names[~enough]),
        model=model.name,
        parameter=model.shared.name,
        unit=model.shared.unit,
        fit=fit,
        descriptive=options.descriptive,
    )
    if fit is None:
        return replace(result, reason="too few points at every site")
    result = replace(result, value=fit.shared, low=fit.low, high=fit.high)
    result = replace(result, worst=find_wild_points(fit))
    if useful.sum() < LEAST_SITES:
        return replace(result, reason=_too_few(result, int(useful.sum())))
    return _judge_solver(result, solver, rng=rng, options=options)


def _judge_solver(
    result: OneProcess,
    solver: Solver,
    *,
    rng: np.random.Generator,
    options: TestOptions,
) -> OneProcess:
    assert result.fit is not None  # noqa: S101
    tested = _test_once(result, solver, rng=rng, options=options)
    if not _is_rejected(tested, options):
        return tested
    subset = _find_subset(tested, solver, rng=rng, options=options)
    return subset or replace(tested, verdict="distinct", reason="")


def _test_once(
    result: OneProcess,
    solver: Solver,
    *,
    rng: np.random.Generator,
    options: TestOptions,
) -> OneProcess:
    """Run both bootstraps, and give every verdict but those of a rejection."""
    fit = result.fit
    if fit is None:
        return result
    freedom = Freedom(between=fit.freedom_between, within=fit.freedom_free)
    state = solver.state(float(to_axis(fit.best, fit.model.shared)))
    drawn = make_replicates(
        solver, state, freedom=freedom, n_replicates=options.n_replicates, rng=rng
    )
    if _at_border(drawn) and options.n_border > options.n_replicates:
        drawn = make_replicates(
            solver, state, freedom=freedom, n_replicates=options.n_border, rng=rng
        )
    scale = fit.error_scale
    used = scale if np.isfinite(scale) and not options.errors_trusted else 1.0
    detectable = find_detectable(
        solver, state, freedom=freedom, critical=drawn.critical, scale=used
    )
    tested = replace(
        result,
        p_parametric=drawn.p_parametric,
        p_wild=drawn.p_wild,
        n_replicates=len(drawn.parametric),
        statistic=fit.f_statistic if freedom.within > 0 else drawn.statistic,
        error_scale=scale,
        error_note=_error_note(fit),
        detectable=detectable,
    )
    return _judge_passing(tested, options)


def _judge_passing(tested: OneProcess, options: TestOptions) -> OneProcess:
    """Give the verdict of a group that is not rejected by both bootstraps."""
    chances = _deciding(tested, options)
    if any(p < options.alpha for p in chances):
        return replace(
            tested, reason="error model: only one of the two bootstraps rejects"
        )
    if options.errors_trusted and "too small" in tested.error_note:
        return replace(tested, reason="the model does not fit at the trusted errors")
    if not (np.isfinite(tested.low) and np.isfinite(tested.high)):
        return replace(tested, reason="window: the data leave the interval open")
    if not tested.detectable_ratio <= _largest(tested, options):
        return replace(tested, reason="window: large differences would not be seen")
    return replace(tested, verdict="shared", reason="")


def _largest(tested: OneProcess, options: TestOptions) -> float:
    fit = tested.fit
    if fit is not None and fit.model.shared.scale == "linear":
        return _LINEAR_SHARE * float(np.ptp(fit.profiles.x))
    return options.largest_ratio


def _deciding(tested: OneProcess, options: TestOptions) -> list[float]:
    chances = [tested.p_parametric]
    if not options.errors_trusted and np.isfinite(tested.p_wild):
        chances.append(tested.p_wild)
    return chances


def _is_rejected(tested: OneProcess, options: TestOptions) -> bool:
    return all(p < options.alpha for p in _deciding(tested, options))


def _at_border(drawn: Replicates) -> bool:
    low, high = BORDER
    return any(low <= p <= high for p in (drawn.p_parametric, drawn.p_wild))


def _find_subset(
    tested: OneProcess,
    solver: Solver,
    *,
    rng: np.random.Generator,
    options: TestOptions,
) -> OneProcess | None:
    """Remove sites one at a time until the rest shares; None if too few remain."""
    profiles, model = solver.profiles, solver.model
    n_sites = len(profiles.name)
    least = max(LEAST_SITES, int(np.ceil(2 * n_sites / 3)))
    kept = list(range(n_sites))
    while len(kept) > least:
        kept.remove(_oddest(solver.site_profile, kept))
        part = profiles.take(kept)
        if _quick_chance(solver.site_profile[kept], part, model) < _CLEARLY_DISTINCT:
            continue
        rest_solver = make_solver(model, part)
        fit = describe_fit(rest_solver)
        rest = replace(tested, fit=fit, value=fit.shared, low=fit.low, high=fit.high)
        rest = _test_once(
            replace(rest, reason="", verdict="undetermined"),
            rest_solver,
            rng=rng,
            options=options,
        )
        if rest.verdict == "shared":
            apart = tuple(name for name in profiles.name if name not in part.name)
            return replace(
                tested,
                verdict="shared by a subset",
                reason="",
                apart=apart,
                kept_fit=fit,
                value=rest.value,
                low=rest.low,
                high=rest.high,
                detectable=rest.detectable,
            )
    return None


def _quick_chance(table: FloatArray, profiles: Profiles, model: Model) -> float:
    """Return the chance of a group by its misfits at the nodes and the tables of F."""
    n_sites = len(table)
    points = int(profiles.present.sum())
    freedom = Freedom(
        between=model.n_shared * (n_sites - 1),
        within=points - (model.n_own + model.n_shared) * n_sites,
    )
    shared = parabola_minimum(table.sum(axis=0)[:, None])
    free = parabola_minimum(table[..., None]).sum(axis=0)
    return freedom.chance(float(freedom.statistic(shared, free)[0]))


def _oddest(table: FloatArray, kept: Sequence[int]) -> int:
    """Return the site whose removal lowers the cost of sharing most."""
    total = table[list(kept)].sum(axis=0)
    free = {site: table[site].min() for site in kept}
    costs = {site: (total - table[site]).min() + free[site] for site in kept}
    return min(costs, key=lambda site: (costs[site], site))


def _error_note(fit: GroupFit) -> str:
    within, scale = fit.freedom_free, fit.error_scale
    if within < 1:
        return "no scatter is left to check the stated errors with"
    # Quantiles of chi-square over its degrees of freedom.
    low, high = 2 * gammaincinv(within / 2, [_SCALE_TAIL, 1 - _SCALE_TAIL]) / within
    if scale < low:
        return "stated errors do not match the scatter: they are too large"
    if scale > high:
        return (
            "stated errors do not match the scatter: they are too small, "
            "or the model does not fit"
        )
    return ""


def _too_few(result: OneProcess, n_useful: int) -> str:
    if result.flat:
        return (
            f"no information: {len(result.flat)} of {len(result.sites)} profiles are "
            f"flat, {n_useful} left"
        )
    return f"too few sites: {n_useful} with enough points"
