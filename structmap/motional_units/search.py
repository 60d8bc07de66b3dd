"""The whole search: background, error scale, who moves, and the units."""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import fdtrc

from structmap.behaviour import (
    Behaviour,
    Measurements,
    control_false_discovery,
    summarise_sites,
)
from structmap.contacts import SiteGraph
from structmap.motional_units.background import (
    MEDIAN_TO_DEVIATION,
    Background,
    Samples,
    trend_bases,
)
from structmap.motional_units.degree import ChosenFits, flat_field, search_samples
from structmap.motional_units.edge_filter import find_edge_filter_units
from structmap.motional_units.field import (
    Booleans,
    Field,
    Floats,
    Integers,
    Links,
    make_links,
    spread_neighbours,
)
from structmap.motional_units.refinement import (
    SMALLEST_UNIT,
    sum_profiles,
    weigh_groups,
)

# Share of false discoveries allowed among the sites called moving.
FALSE_DISCOVERY_SHARE = 0.05
MEDIAN_EFFICIENCY = 0.37
SIGN = {"both": 0, "up": 1, "down": -1}


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class UnitSearch:
    """What the search found, and what the tests of chance need to go on from it.

    Rows run over `Measurements.site`.

    Attributes
    ----------
    behaviour : Behaviour
        Baseline, error scale and who moves.
    site : ndarray of int, shape (n_rows,)
        Site of each row.
    label : ndarray of int, shape (n_rows,)
        Unit of each row, -1 for none; units by falling energy.
    member_rows, members : tuple of ndarray of int
        Members of each unit, as rows and as sites, rising.
    energy : ndarray of float, shape (n_units,)
        Log-likelihood gained by each unit less its price.
    contrast : ndarray of float, shape (n_units,)
        1 less the share of the unit's profile that the ring of its neighbours shows.
    reason : str
        Why no unit can be told from these data, one sentence; blank when they can.
    field : Field
        Deviations with scaled errors.
    links : Links
        Contacts between rows, with the worth of an edge.
    samples : Samples
        The values in units of the median errors, as one sample.
    bases : tuple of ndarray of float
        Terms of the trends tried.
    direction : int
        1 or -1 when only units that deviate up or down count, else 0.
    scale : float
        Error scale of `samples`.
    """

    behaviour: Behaviour
    site: Integers
    label: Integers
    member_rows: tuple[Integers, ...]
    members: tuple[Integers, ...]
    energy: Floats
    contrast: Floats
    reason: str
    field: Field
    links: Links
    samples: Samples
    bases: tuple[Floats, ...]
    direction: int
    scale: float


def find_motional_units(
    measurements: Measurements,
    graph: SiteGraph,
    centres: NDArray[np.float64],
    *,
    direction: Literal["both", "up", "down"] = "both",
    baseline: ArrayLike | None = None,
) -> UnitSearch:
    """Find the baseline, the error scale, the sites that move and the motional units.

    The baseline is a robust trend over the fold of degree 0 to 3; the degree is chosen
    together with the units, so that a patch of moving sites is explained as a unit or
    as a trend, whichever costs less. Pairs in contact that deviate alike are merged
    into seeds; sites then join the unit in which their likelihood gains most; units
    that do not pay their price are dropped.

    Parameters
    ----------
    measurements : Measurements
        What is compared.
    graph : SiteGraph
        Contacts between sites.
    centres : ndarray of float, shape (n_sites, 3)
        Centre of each site in Å (rows of sites that are not measured may be NaN).
    direction : {'both', 'up', 'down'}
        Which way units may deviate from the baseline.
    baseline : array_like or None
        The baseline in the units of the values, when it is known: anything that
        broadcasts to shape (n, n_columns).

    Returns
    -------
    UnitSearch
        Also when no unit can be told; then `reason` says why.

    Raises
    ------
    ValueError
        If a site of the measurements has no centre.
    """
    known = None if baseline is None else _spread_baseline(measurements, baseline)
    samples, scales = _scale_columns(measurements, known)
    links = link_rows(measurements.site, graph)
    bases = _choose_bases(centres[measurements.site], known is not None)
    chosen = _search(samples, links, bases, SIGN[direction])
    told = Background(value=chosen.background, scale=chosen.scale, error=chosen.error)
    field = flat_field(samples, told, direction=SIGN[direction])
    label, energy = _sort_units(field, links, chosen.label[0])
    background = chosen.background[0] * scales + (0.0 if known is None else known)
    rows = tuple(np.flatnonzero(label == unit) for unit in range(len(energy)))
    return UnitSearch(
        behaviour=replace(
            _describe(
                measurements,
                background=background,
                degree=int(chosen.degree[0]),
                field=field,
                error_scale=float(
                    chosen.scale[0] * np.median(own_scatter(measurements))
                ),
                resting=label < 0,
            ),
            edge_filter_unit=find_edge_filter_units(samples, links, bases[0]),
        ),
        site=measurements.site,
        label=label,
        member_rows=rows,
        members=tuple(measurements.site[members] for members in rows),
        energy=energy,
        contrast=find_contrast(field, links, label),
        reason=_why_none(links, float(chosen.scale[0])),
        field=field,
        links=links,
        samples=samples,
        bases=bases,
        direction=SIGN[direction],
        scale=float(chosen.scale[0]),
    )


def _spread_baseline(measurements: Measurements, baseline: ArrayLike) -> Floats:
    shape = measurements.value.shape
    given = np.asarray(baseline, np.float64)
    if given.ndim == 1 and len(given) == shape[0] and shape[1] != shape[0]:
        given = given[:, None]
    try:
        known: Floats = np.broadcast_to(given, shape)
    except ValueError as error:
        raise ValueError(
            f"baseline has shape {given.shape}; it must fit the values, {shape}"
        ) from error
    if not np.isfinite(known).all():
        raise ValueError("baseline is not finite everywhere")
    return known


def _scale_columns(
    measurements: Measurements, known: Floats | None
) -> tuple[Samples, Floats]:
    """Divide each column by its median error, so that columns can be compared."""
    value, error = measurements.value, measurements.error
    seen = np.isfinite(value)
    scales = measurements_scale(measurements) * own_scatter(measurements)
    if known is not None:
        value = value - known
    relative = np.where(seen, error / measurements_scale(measurements), 0.0)
    mean_square = (relative**2).sum(1) / np.maximum(seen.sum(1), 1)
    samples = Samples(
        value=np.where(seen, value / scales, 0.0)[None],
        error=np.sqrt(mean_square),
        seen=None if seen.all() else seen,
        lost=measurements.n_baselines,
        is_profile=measurements.is_profile,
    )
    return samples, scales


def link_rows(site: Integers, graph: SiteGraph) -> Links:
    """Return the contacts between measured sites, as rows.

    Parameters
    ----------
    site : ndarray of int, shape (n_rows,)
        Site of each row, rising.
    graph : SiteGraph
        Contacts between sites.

    Returns
    -------
    Links
        Contacts between rows.
    """
    row_of_site = np.full(max(graph.n_sites, int(site.max(initial=-1)) + 1), -1)
    row_of_site[site] = np.arange(len(site))
    first, second = row_of_site[graph.site_1], row_of_site[graph.site_2]
    both = (first >= 0) & (second >= 0)
    return make_links(len(site), first[both], second[both])


def _choose_bases(centres: Floats, baseline_given: bool) -> tuple[Floats, ...]:  # noqa: FBT001
    if not np.isfinite(centres).all():
        raise ValueError("a measured site has no centre")
    if baseline_given:
        return (np.zeros((len(centres), 0)),)
    return tuple(trend_bases(centres))


def _search(
    samples: Samples, links: Links, bases: tuple[Floats, ...], direction: int
) -> ChosenFits:
    """Search, except where there are too few sites to search."""
    if links.n_rows >= SMALLEST_UNIT:
        return search_samples(samples, links, bases=bases, direction=direction)
    return ChosenFits(
        degree=np.zeros(1, np.int64),
        background=samples.value,
        scale=np.zeros(1),
        label=np.full((1, links.n_rows), -1, np.int64),
        error=samples.error[None],
    )


def _sort_units(field: Field, links: Links, label: Integers) -> tuple[Integers, Floats]:
    """Renumber the units of one sample by falling energy, then by first row."""
    numbered = np.full_like(label, -1)
    inside = label >= 0
    numbered[inside] = np.unique(label[inside], return_inverse=True)[1]
    group = weigh_groups(field, links, numbered)
    order = np.lexsort((group.first_row, -group.energy))
    rank = np.full(len(order) + 1, -1)
    rank[order] = np.arange(len(order))
    return rank[numbered], group.energy[order]


def _describe(
    measurements: Measurements,
    *,
    background: Floats,
    degree: int,
    field: Field,
    error_scale: float,
    resting: Booleans,
) -> Behaviour:
    chance = _chance_of_deviation(field, resting)
    deviation = np.sqrt(field.power)
    if measurements.value.shape[1] == 1:
        deviation = deviation * np.sign(field.value[:, 0])
        chance = _one_sided(chance, deviation, field.direction)
    summary = summarise_sites(measurements, background, error_scale=error_scale)
    return Behaviour(
        background=background,
        degree=degree,
        trend_share=_trend_share(measurements, background, degree),
        error_scale=error_scale,
        deviation=deviation,
        p_deviation=chance,
        moves=control_false_discovery(chance) <= FALSE_DISCOVERY_SHARE,
        summary=summary.value,
        summary_error=summary.error,
        summary_name=summary.name,
        summary_unit=summary.unit,
        edge_filter_unit=np.zeros(len(deviation), np.int64),
    )


def _chance_of_deviation(field: Field, resting: Booleans) -> Floats:
    """Return the chance of each deviation under an error scale that was estimated.

    The scale is a median of absolute values, which tells the standard deviation as well
    as a mean square of 37 % of the values would (Rousseeuw and Croux, J. Am. Stat.
    Assoc. 88, 1273 (1993), from memory); so the mean square deviation of a site follows
    Fisher's F with that many degrees of freedom below. The baseline, a median too, has
    an error of its own, and a median of distances from it comes out small in small
    samples (n / (n - 0.8); Croux and Rousseeuw, Compstat 1992, from memory).
    """
    n_rest = max(int(resting.sum()), 2)
    told = MEDIAN_EFFICIENCY * float(field.freedom[resting].sum())
    small = (n_rest / (n_rest - 0.8)) ** 2 * (1 + np.pi / (2 * n_rest))
    out: Floats = fdtrc(
        field.freedom, max(told, 1.0), field.power / field.freedom / small
    )
    return out


def _one_sided(chance: Floats, deviation: Floats, direction: int) -> Floats:
    """Chance of a deviation in one direction of a single value."""
    if direction == 0:
        return chance
    return np.where(deviation * direction > 0, chance / 2, 1 - chance / 2)


def _trend_share(measurements: Measurements, background: Floats, degree: int) -> float:
    """Share of the variance that the trend takes, where outliers do not count."""
    if degree == 0:
        return 0.0
    rest = measurements.value - background
    spread = np.nanmedian(np.abs(rest), axis=0) * MEDIAN_TO_DEVIATION
    about = np.abs(background - np.median(background, axis=0))
    bent = np.median(about, axis=0) * MEDIAN_TO_DEVIATION
    trend = float(np.mean((bent / measurements_scale(measurements)) ** 2))
    noise = float(np.mean((spread / measurements_scale(measurements)) ** 2))
    return trend / (trend + noise)


def measurements_scale(measurements: Measurements) -> Floats:
    """Return the median error of each column, which columns are compared in.

    Parameters
    ----------
    measurements : Measurements
        What is compared.

    Returns
    -------
    ndarray of float, shape (n_columns,)
        In the units of the columns; 1 without any site.
    """
    if not len(measurements.site):
        return np.ones(len(measurements.column))
    return np.nanmedian(measurements.error, axis=0)


def own_scatter(measurements: Measurements) -> Floats:
    """Return how many of its errors each separate quantity scatters over the sites.

    Quantities of one table (relaxation rates, NOE) differ in how well their errors
    describe the quiet sites; each gets a scale of its own, so that one with errors
    stated too small does not make every site move.

    Parameters
    ----------
    measurements : Measurements
        What is compared.

    Returns
    -------
    ndarray of float, shape (n_columns,)
        Median distance from the median in median errors, as a standard deviation; 1 for
        the points of a profile, for a single quantity, and where over half of the
        values are equal.
    """
    value = measurements.value
    if measurements.is_profile or value.shape[1] < 2 or not len(value):
        return np.ones(value.shape[1])
    off = np.abs(value - np.nanmedian(value, axis=0))
    size = MEDIAN_TO_DEVIATION * np.nanmedian(off, axis=0)
    out: Floats = np.where(size > 0, size / measurements_scale(measurements), 1.0)
    return out


def find_contrast(field: Field, links: Links, label: Integers) -> Floats:
    """Return how sharply each unit is set off from its surroundings.

    Parameters
    ----------
    field : Field
        Deviations.
    links : Links
        Who touches whom.
    label : ndarray of int, shape (n_rows,)
        Units numbered from 0, -1 for none.

    Returns
    -------
    ndarray of float, shape (n_units,)
        1 less the projection of the mean profile of the neighbours in no unit on the
        unit's own; 1 where there are no such neighbours.
    """
    n_units = int(label.max(initial=-1)) + 1
    contrast = np.ones(n_units)
    sums = sum_profiles(field, label)
    for unit in range(n_units):
        _, near = spread_neighbours(links, np.flatnonzero(label == unit))
        ring = np.unique(near[label[near] < 0])
        around = sum_profiles(
            field, np.where(np.isin(np.arange(len(label)), ring), 0, -1)
        )
        if not len(ring):
            continue
        both = (sums.weight[unit] > 0) & (around.weight[0] > 0)
        mean = np.where(both, sums.push[unit] / np.where(both, sums.weight[unit], 1), 0)
        outside = np.where(
            both, around.push[0] / np.where(both, around.weight[0], 1), 0
        )
        contrast[unit] = 1 - float(mean @ outside) / max(float(mean @ mean), 1e-300)
    return contrast


def _why_none(links: Links, error_scale: float) -> str:
    if links.n_rows == 0:
        return "No unit can be told: no site has enough values to compare."
    if links.n_rows < SMALLEST_UNIT:
        sites = "one site" if links.n_rows == 1 else "two sites"
        return f"No unit can be told: only {sites} to compare; a unit needs three."
    if not error_scale > 0:
        return "No unit can be told: all values are equal."
    if not len(links.first):
        return "No unit can be told: no two measured sites touch each other."
    return ""
