"""How the units change when choices that matter are made otherwise."""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.behaviour import Measurements
from structmap.contacts import SiteGraph
from structmap.motional_units.agreement import adjusted_rand_index
from structmap.motional_units.field import Integers
from structmap.motional_units.refinement import find_groups
from structmap.motional_units.search import UnitSearch, find_motional_units

# Every limit of the search counts in errors, so errors taken larger by a factor raise
# all of them by it.
THRESHOLD_FACTORS = (0.8, 1.25)


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
    search: UnitSearch,
    measurements: Measurements,
    graphs: Mapping[str, SiteGraph],
    *,
    centres: NDArray[np.float64],
    direction: Literal["both", "up", "down"] = "both",
    baseline: ArrayLike | None = None,
) -> tuple[Alternative, ...]:
    """Search once on each of some other contact graphs.

    Parameters
    ----------
    search : UnitSearch
        What the analysis found.
    measurements : Measurements
        What is compared.
    graphs : mapping of str to SiteGraph
        Contacts by other rules, each under the name of its rule.
    centres : ndarray of float, shape (n_sites, 3)
        Centre of each site in Å.
    direction : {'both', 'up', 'down'}
        Which way units may deviate.
    baseline : array_like or None
        The baseline when it is known.

    Returns
    -------
    tuple of Alternative
        In the order of the graphs.
    """
    found = {
        name: find_motional_units(
            measurements, graph, centres, direction=direction, baseline=baseline
        ).label
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
