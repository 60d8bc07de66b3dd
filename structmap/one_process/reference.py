"""What a verdict is compared with: other groups, wild points, several tests."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.engine import make_solver
from structmap.one_process.model import FloatArray
from structmap.one_process.profiles import GroupFit, Profiles, find_flat_sites
from structmap.one_process.search import parabola_minimum

_WILD_ERRORS = 4.5
_SHOWN = 3


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Reference:
    """Sites outside the group, from which groups of the same size are drawn.

    Attributes
    ----------
    profiles : Profiles
        Sites outside the group; flat ones are left out of random groups.
    sets : tuple of ndarray of int
        Groups to take instead of random ones, as indices into the profiles: those that
        the same clustering picks on permuted sites.
    """

    profiles: Profiles
    sets: tuple[NDArray[np.int64], ...] = ()


def find_reference_p(
    fit: GroupFit, reference: Reference, *, n_sets: int, rng: np.random.Generator
) -> float:
    """Return how often groups outside agree as well as this one.

    Parameters
    ----------
    fit : GroupFit
        Of the group's informative sites.
    reference : Reference
        Sites outside, and perhaps the groups to take.
    n_sets : int
        Random groups to draw.
    rng : numpy.random.Generator
        Draws them.

    Returns
    -------
    float
        (1 + groups with an F no larger) / (1 + groups); NaN where the sites outside
        are no more than those of the group.
    """
    outside = reference.profiles
    if not reference.sets:
        few = outside.present.sum(axis=1) < fit.model.min_points
        outside = outside.take(~(find_flat_sites(outside) | few))
    size = len(fit.profiles.name)
    if not reference.sets and len(outside.name) <= size:
        return float("nan")
    table = make_solver(fit.model, outside).site_profile
    drawn = reference.sets or tuple(
        rng.permuted(np.tile(np.arange(len(outside.name)), (n_sets, 1)), axis=1)[
            :, :size
        ]
    )
    points = outside.present.sum(axis=1)
    each = fit.model.n_own + fit.model.n_shared
    found = _set_statistics(table, points, drawn, each=each)
    whole = (np.arange(size),)
    own = _set_statistics(
        fit.grid_chi2, fit.profiles.present.sum(axis=1), whole, each=each
    )[0]
    return float((1 + np.count_nonzero(found <= own)) / (len(found) + 1))


def _set_statistics(
    table: FloatArray,
    points: NDArray[np.int64],
    sets: Sequence[NDArray[np.int64]],
    *,
    each: int,
) -> FloatArray:
    """Return F of sets of sites from misfits at nodes, all sets of a size at once."""
    free_misfit = parabola_minimum(table.T[None])[0]
    sizes = np.array([len(one) for one in sets])
    out = np.empty(len(sets))
    for size in np.unique(sizes):
        which = np.nonzero(sizes == size)[0]
        members = np.stack([sets[int(number)] for number in which])
        shared = parabola_minimum(table[members].sum(axis=1).T[None])[0]
        free = free_misfit[members].sum(axis=1)
        within = np.maximum(points[members].sum(axis=1) - each * size, 1)
        growth = np.maximum(shared - free, 0.0) / max(size - 1, 1)
        out[which] = growth / np.maximum(free / within, 1e-300)
    return out


def find_wild_points(fit: GroupFit) -> tuple[str, ...]:
    """Name the points that lie far off the shared fit.

    Parameters
    ----------
    fit : GroupFit
        Of a group.

    Returns
    -------
    tuple of str
        At most three phrases, the worst first; points beyond 4.5 stated errors.
    """
    spread = np.sqrt(np.maximum(1 - fit.leverage, 0.05)) * fit.profiles.error
    distance = np.nan_to_num(np.abs(fit.residual) / spread)
    order = np.argsort(-distance, axis=None, kind="stable")[:_SHOWN]
    phrases = []
    for site, point in zip(*np.unravel_index(order, distance.shape), strict=True):
        if distance[site, point] > _WILD_ERRORS:
            where = fit.model.name_point(float(fit.profiles.x[point]))
            what = f"{fit.profiles.name[site]}, {where}"
            phrases.append(f"{what}: {distance[site, point]:.1f} errors off")
    return tuple(phrases)


def adjust_by_holm(chances: Sequence[float]) -> list[float]:
    """Return Holm's adjusted chances of several groups.

    Parameters
    ----------
    chances : sequence of float
        NaN where a group was not tested.

    Returns
    -------
    list of float
        Never falling with the chance, at most 1; NaN stays.

    References
    ----------
    .. [1] Holm, Scand. J. Stat. 6, 65 (1979).
    """
    out = [float("nan")] * len(chances)
    tested = sorted((p, index) for index, p in enumerate(chances) if np.isfinite(p))
    running = 0.0
    for rank, (chance, index) in enumerate(tested):
        running = max(running, min(1.0, (len(tested) - rank) * chance))
        out[index] = running
    return out
