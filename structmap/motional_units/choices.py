"""How the units change when choices that matter are made otherwise."""

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from structmap.contacts import SiteGraph
from structmap.motional_units.agreement import adjusted_rand_index
from structmap.motional_units.degree import search_samples
from structmap.motional_units.field import Integers
from structmap.motional_units.refinement import find_groups
from structmap.motional_units.search import UnitSearch, link_rows

# Every limit of the search counts in errors, so errors taken larger by a factor raise
# all of them by it.
THRESHOLD_FACTORS = (0.8, 1.25)
# Above this many rows every degree of the trend would cost too much.
LARGE = 2000


@dataclass(frozen=True, slots=True, kw_only=True)
class Alternative:
    """What one choice made otherwise would have found.

    Attributes
    ----------
    choice : str
        What was made otherwise, ``heavy atoms within 5 Å``.
    n_units, n_sites : int
        Units found, and sites in them.
    agreement : float
        Adjusted Rand index against the units of the analysis, the sites in no unit
        counting as one group.
    """

    choice: str
    n_units: int
    n_sites: int
    agreement: float


def vary_contacts(
    search: UnitSearch, graphs: Mapping[str, SiteGraph]
) -> tuple[Alternative, ...]:
    """Search once on each of some other contact graphs.

    Parameters
    ----------
    search : UnitSearch
        What the analysis found; its values, terms of trends and direction are kept.
    graphs : mapping of str to SiteGraph
        Contacts by other rules, each under the name of its rule.

    Returns
    -------
    tuple of Alternative
        In the order of the graphs. Above 2,000 sites the degree of the trend is kept
        too; empty when no unit can be told.
    """
    if search.reason:
        return ()
    bases = search.bases
    if search.links.n_rows > LARGE:
        bases = (bases[search.behaviour.degree],)
    found = {
        name: search_samples(
            search.samples,
            link_rows(search.site, graph),
            bases=bases,
            direction=search.direction,
        ).label[0]
        for name, graph in graphs.items()
    }
    return tuple(_compare(name, search, label) for name, label in found.items())


def vary_thresholds(search: UnitSearch) -> tuple[Alternative, ...]:
    """Group once with all limits lower and once with all limits higher.

    Parameters
    ----------
    search : UnitSearch
        What the analysis found; its baseline and error scale are kept.

    Returns
    -------
    tuple of Alternative
        Limits by 0.8, then by 1.25; empty when no unit can be told.
    """
    if search.reason:
        return ()
    return tuple(
        _compare(
            _name_limits(factor),
            search,
            _group_with(search, factor),
        )
        for factor in THRESHOLD_FACTORS
    )


def _name_limits(factor: float) -> str:
    way = "lower" if factor < 1 else "higher"
    return f"all limits {100 * abs(factor - 1):.0f}\u00a0% {way}"


def _group_with(search: UnitSearch, factor: float) -> Integers:
    field = search.field
    stricter = replace(
        field,
        variance=field.variance * factor**2,
        weight=field.weight / factor**2,
        power=field.power / factor**2,
    )
    return find_groups(stricter, search.links).label


def _compare(choice: str, search: UnitSearch, label: Integers) -> Alternative:
    return Alternative(
        choice=choice,
        n_units=len(np.unique(label[label >= 0])),
        n_sites=int((label >= 0).sum()),
        agreement=adjusted_rand_index(search.label, label),
    )
