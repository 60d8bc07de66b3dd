"""The part of the profiles that was not grouped: level beside shape, and the reverse.

A raised level of a profile without dispersion is motion outside the window of the
experiment; a group formed on shapes does not see it. So the other part is looked at,
against the sites that the first part left at rest.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from structmap.behaviour import Measurements
from structmap.contacts import SiteGraph
from structmap.motional_units.field import Booleans, Floats, Integers
from structmap.motional_units.search import UnitSearch, find_motional_units
from structmap.records import store_read_only

FEWEST_RESTING = 5


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class OtherPart:
    """What the part of the profiles shows that was not grouped.

    Attributes
    ----------
    part : {'level', 'shape'}
        Which part that is.
    groups : tuple of ndarray of int
        Units found in it, those sites of each that the grouped part leaves at rest; the
        largest first, groups of fewer than three left out.
    raised : tuple of bool
        For levels whether the group lies above the level of the sites at rest.
    single : ndarray of int
        Other sites that move in this part alone.
    n_shared : int
        Sites in a unit of both parts.
    """

    part: Literal["level", "shape"]
    groups: tuple[Integers, ...]
    raised: tuple[bool, ...]
    single: Integers
    n_shared: int

    def __post_init__(self) -> None:
        store_read_only(self, "single", np.int64, (None,))


def look_at_other_part(
    search: UnitSearch,
    other: Measurements,
    graph: SiteGraph,
    *,
    centres: Floats,
) -> OtherPart:
    """Search the part of the profiles that was not grouped; no test of chance is made.

    Parameters
    ----------
    search : UnitSearch
        What the grouped part showed.
    other : Measurements
        The other part of the same values at the same sites.
    graph : SiteGraph
        Contacts between sites.
    centres : ndarray of float, shape (n_sites, 3)
        Centre of each site in Å.

    Returns
    -------
    OtherPart
        Held against the median of the sites that the grouped part left at rest, because
        levels differ from site to site for reasons that follow no trend over the fold.

    Raises
    ------
    ValueError
        If the two parts are not of the same sites.
    """
    if not np.array_equal(search.site, other.site):
        raise ValueError("other is not of the sites that were searched")
    resting = (search.label < 0) & ~search.behaviour.moves
    if resting.sum() < FEWEST_RESTING:
        resting[:] = True
    baseline = np.median(other.value[resting], axis=0)
    found = find_motional_units(other, graph, centres, baseline=baseline[None])
    quiet = (search.label < 0) & ~search.behaviour.moves
    groups = [rows[quiet[rows]] for rows in found.member_rows]
    groups = sorted((g for g in groups if len(g) >= 3), key=len, reverse=True)
    grouped = np.isin(np.arange(len(quiet)), np.concatenate([*groups, []]))
    return OtherPart(
        part="level" if other.part == "level" else "shape",
        groups=tuple(search.site[rows] for rows in groups),
        raised=tuple(bool(found.field.value[rows].mean() > 0) for rows in groups),
        single=_find_single(search, found, quiet & ~grouped),
        n_shared=int(((search.label >= 0) & (found.label >= 0)).sum()),
    )


def _find_single(search: UnitSearch, found: UnitSearch, free: Booleans) -> Integers:
    out: Integers = search.site[free & found.behaviour.moves]
    return out
