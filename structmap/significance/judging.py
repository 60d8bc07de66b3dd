"""All tests of all units, each from its own stream of random numbers."""

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial
from typing import TypeVar

import numpy as np

from structmap.contacts import SiteGraph
from structmap.motional_units.field import (
    Field,
    Floats,
    Integers,
    Links,
    restrict_links,
    take_rows,
)
from structmap.motional_units.refinement import sum_profiles, weigh_groups
from structmap.motional_units.search import UnitSearch, link_rows
from structmap.records import store_read_only
from structmap.significance.chance import (
    MOST_PERMUTATIONS,
    PERMUTATIONS,
    Chance,
    batch_size,
    find_chance,
)
from structmap.significance.placement import Scores, order_scorer, random_orders
from structmap.significance.stability import REPEATS, Recurrence, find_recurrence
from structmap.significance.surrogates import smooth_orders
from structmap.significance.verdict import Verdict, choose_verdict

# A site outside a unit is its fringe when so many of the repeats put it inside.
FRINGE_SHARE = 0.5
# Noise added, in scaled errors. The data carry their noise already: with as much again
# weak units that are there get lost in most runs.
ADDED_NOISE = 0.5
# Still the runs on their own make members look less certain than they are, and sites
# outside more; the data as measured count as this share of all runs. Settled on planted
# problems apart from those that the method is judged by.
OWN_SHARE = 0.7
# Above this many sites all units share one null with all sites in the pool.
LARGE = 2000
Progress = Callable[[str, float], None]
Outcome = TypeVar("Outcome")


@dataclass(frozen=True, slots=True, kw_only=True)
class Effort:
    """How much to compute.

    Attributes
    ----------
    most_permutations : int
        Most permutations where a p value lies at the border.
    repeats : int
        Searches with redrawn errors behind stability and behind membership each.
    workers : int
        Threads to use; the result does not depend on it.
    """

    most_permutations: int = MOST_PERMUTATIONS
    repeats: int = REPEATS
    workers: int = 1


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class UnitEvidence:
    """What speaks for one unit.

    Attributes
    ----------
    p_any, p_place, p_smooth : float
        Chances of an accident; see `choose_verdict`.
    stability, contrast : float
        From 0, and at most 1.
    verdict : str
        One word.
    membership : ndarray of float, shape (n_rows,)
        Probability that each row belongs to the unit: the share of the runs with
        redrawn errors that found it again, blended with the data as measured.
    fringe : ndarray of int
        Sites outside the unit that half of the repeats or more put inside.
    """

    p_any: float
    p_place: float
    p_smooth: float
    stability: float
    contrast: float
    verdict: Verdict
    membership: Floats
    fringe: Integers

    def __post_init__(self) -> None:
        store_read_only(self, "membership", np.float64, (None,))
        store_read_only(self, "fringe", np.int64, (None,))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Judgement:
    """What the tests say about all units.

    Attributes
    ----------
    units : tuple of UnitEvidence
        In the order of the search.
    p_any : float
        Of the data set as a whole; 1 without any unit.
    membership : ndarray of float, shape (n_rows,)
        Largest probability over the units; NaN where a row is in none in any run.
    repeats : int
        Runs behind each share.
    shared_null : bool
        Whether all units were held against one null because there are many sites.
    """

    units: tuple[UnitEvidence, ...]
    p_any: float
    membership: Floats
    repeats: int
    shared_null: bool

    def __post_init__(self) -> None:
        store_read_only(self, "membership", np.float64, (None,))


def judge_units(
    search: UnitSearch,
    graphs: tuple[SiteGraph, ...],
    *,
    rng: np.random.Generator,
    progress: Progress | None = None,
    effort: Effort | None = None,
) -> Judgement:
    """Test the units that a search has found.

    Parameters
    ----------
    search : UnitSearch
        What was found.
    graphs : tuple of SiteGraph
        Contacts at several cutoffs, over which stability is tested.
    rng : numpy.random.Generator
        Where chance comes from; each test of each unit draws from a child of its own.
    progress : callable or None
        Called with a step and the share done.
    effort : Effort or None
        How much to compute; None for the full amount on one thread.

    Returns
    -------
    Judgement
        One piece of evidence for each unit.

    Raises
    ------
    ValueError
        If no graph is given while there are units.
    """
    n_rows, n_units = len(search.label), len(search.members)
    children = rng.spawn(2 + 2 * n_units)
    if not n_units:
        return _no_unit(n_rows)
    if not graphs:
        raise ValueError("graphs is empty; stability needs at least one")
    links = tuple(link_rows(search.site, graph) for graph in graphs)
    tell = progress or _say_nothing
    effort = effort or Effort()
    tell("redrawing errors", 0.0)
    again = find_recurrence(
        search, links, noise=ADDED_NOISE, repeats=effort.repeats, rng=children[1]
    )
    tell("permuting sites", 0.4)
    if n_rows > LARGE:
        chances = _shared_chances(search, children)
    else:
        chances = _own_chances(search, children, effort)
    tell("tests done", 1.0)
    return _collect(search, again, chances)


def _say_nothing(step: str, share: float) -> None:
    del step, share


def _no_unit(n_rows: int) -> Judgement:
    return Judgement(
        units=(),
        p_any=1.0,
        membership=np.full(n_rows, np.nan),
        repeats=0,
        shared_null=False,
    )


def _run(steps: Sequence[Callable[[], Outcome]], workers: int) -> list[Outcome]:
    """Run steps in order or side by side; each has its own random numbers."""
    if workers <= 1:
        return [step() for step in steps]
    with ThreadPoolExecutor(workers) as pool:
        return [future.result() for future in [pool.submit(step) for step in steps]]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Chances:
    """p_any, then p_place and p_smooth of each unit."""

    any: float
    place: tuple[float, ...]
    smooth: tuple[float, ...]


def _own_chances(
    search: UnitSearch, children: list[np.random.Generator], effort: Effort
) -> _Chances:
    most = effort.most_permutations
    units = range(len(search.members))
    found = _run(
        [
            partial(_chance_any, search, children[0], most),
            *(
                partial(_chance_place, search, u, children[2 + 2 * u], most)
                for u in units
            ),
            *(
                partial(_chance_smooth, search, u, children[3 + 2 * u], most)
                for u in units
            ),
        ],
        effort.workers,
    )
    p = [one.p for one in found]
    return _Chances(
        any=p[0], place=tuple(p[1 : 1 + len(units)]), smooth=tuple(p[1 + len(units) :])
    )


def _capped(search: UnitSearch) -> Floats:
    return weigh_groups(search.field, search.links, search.label).capped_energy


def _chance_any(search: UnitSearch, rng: np.random.Generator, most: int) -> Chance:
    observed = float(np.maximum(_capped(search), 0).sum())
    source = random_orders(search.links.n_rows, rng)
    score = order_scorer(search.field, search.links)
    return find_chance(
        observed,
        lambda count: score(source(count)).total,
        batch=batch_size(search.links.n_rows),
        most=most,
    )


def _chance_place(
    search: UnitSearch, unit: int, rng: np.random.Generator, most: int
) -> Chance:
    field, links = _without_others(search, unit)
    source = random_orders(links.n_rows, rng)
    return _chance_of_largest(search, unit, (field, links), source, most)


def _chance_smooth(
    search: UnitSearch, unit: int, rng: np.random.Generator, most: int
) -> Chance:
    field, links = _without_others(search, unit)
    source = smooth_orders(field, links, _profile(search, unit), rng)
    return _chance_of_largest(search, unit, (field, links), source, most)


def _chance_of_largest(
    search: UnitSearch,
    unit: int,
    pool: tuple[Field, Links],
    source: Callable[[int], Integers],
    most: int,
) -> Chance:
    score = order_scorer(*pool)
    return find_chance(
        float(_capped(search)[unit]),
        lambda count: score(source(count)).largest,
        batch=batch_size(pool[1].n_rows),
        most=most,
    )


def _without_others(search: UnitSearch, unit: int) -> tuple[Field, Links]:
    keep = (search.label < 0) | (search.label == unit)
    return take_rows(search.field, np.flatnonzero(keep)), restrict_links(
        search.links, keep
    )


def _profile(search: UnitSearch, unit: int) -> Floats:
    sums = sum_profiles(search.field, search.label)
    known = sums.weight[unit] > 0
    out: Floats = np.where(
        known, sums.push[unit] / np.where(known, sums.weight[unit], 1), 0
    )
    return out


def _shared_chances(
    search: UnitSearch, children: list[np.random.Generator]
) -> _Chances:
    """One null with all sites in the pool for all units: conservative and quick."""
    n_rows = search.links.n_rows
    capped = _capped(search)
    largest = int(np.argmax(capped))
    white = _draw_null(search, random_orders(n_rows, children[0]))
    profile = _profile(search, largest)
    smooth = _draw_null(
        search, smooth_orders(search.field, search.links, profile, children[2])
    )
    return _Chances(
        any=_share_above(white.total, float(np.maximum(capped, 0).sum())),
        place=tuple(_share_above(white.largest, float(one)) for one in capped),
        smooth=tuple(_share_above(smooth.largest, float(one)) for one in capped),
    )


def _draw_null(search: UnitSearch, source: Callable[[int], Integers]) -> Scores:
    size = batch_size(search.links.n_rows)
    score = order_scorer(search.field, search.links)
    parts = []
    for start in range(0, PERMUTATIONS, size):
        orders = source(min(size, PERMUTATIONS - start))
        parts.append(score(orders))
    return Scores(
        total=np.concatenate([part.total for part in parts]),
        largest=np.concatenate([part.largest for part in parts]),
    )


def _share_above(null: Floats, observed: float) -> float:
    return (1 + int((null >= observed).sum())) / (1 + len(null))


def _collect(search: UnitSearch, again: Recurrence, chances: _Chances) -> Judgement:
    units = tuple(
        _weigh_unit(search, unit, again, chances) for unit in range(len(search.members))
    )
    best = np.max([unit.membership for unit in units], axis=0)
    return Judgement(
        units=units,
        p_any=chances.any,
        membership=np.where(best > 0, best, np.nan),
        repeats=again.repeats,
        shared_null=len(search.label) > LARGE,
    )


def _weigh_unit(
    search: UnitSearch, unit: int, again: Recurrence, chances: _Chances
) -> UnitEvidence:
    numbers = {
        "p_any": chances.any,
        "p_place": chances.place[unit],
        "p_smooth": chances.smooth[unit],
        "stability": float(again.stability[unit]),
        "contrast": float(search.contrast[unit]),
    }
    inside = search.label == unit
    share = again.share[unit]
    return UnitEvidence(
        **numbers,
        verdict=choose_verdict(**numbers),
        membership=OWN_SHARE * inside + (1 - OWN_SHARE) * share,
        fringe=search.site[~inside & (share >= FRINGE_SHARE)],
    )
