"""A second opinion: general clustering held to the same contacts."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from structmap.motional_units.agreement import adjusted_rand_index
from structmap.motional_units.field import Floats, Integers
from structmap.motional_units.search import UnitSearch

MOST_GROUPS = 30
FEWEST_ROWS = 4


@dataclass(frozen=True, slots=True, kw_only=True)
class SecondOpinion:
    """What contiguity-constrained clustering makes of the same data.

    Attributes
    ----------
    n_sites : int
        Sites clustered: those of the largest connected part of the contacts.
    n_groups : int
        Number of groups by the criterion; 0 when there are too few sites.
    criterion : float
        Calinski-Harabasz index of that number.
    agreement : float
        Adjusted Rand index against the units of the analysis, the sites in no unit
        counting as one group; NaN when there are too few sites.
    """

    n_sites: int
    n_groups: int
    criterion: float
    agreement: float


def ask_second_opinion(search: UnitSearch) -> SecondOpinion:
    """Cluster the deviations along the contacts with scikit-learn, and compare.

    Parameters
    ----------
    search : UnitSearch
        Deviations, contacts and units of the analysis.

    Returns
    -------
    SecondOpinion
        Of Ward's linkage on the deviations in errors, merging only along contacts; of 2
        to 30 groups the number with the largest Calinski-Harabasz index.

    References
    ----------
    .. [1] Ward, J. Am. Stat. Assoc. 58, 236-244 (1963).
    .. [2] Calinski and Harabasz, Commun. Stat. 3, 1-27 (1974).
    """
    links = search.links
    shape = (links.n_rows, links.n_rows)
    ends = (
        np.concatenate([links.first, links.second]),
        np.concatenate([links.second, links.first]),
    )
    touching = csr_array((np.ones(len(ends[0])), ends), shape=shape)
    part = connected_components(touching, directed=False)[1]
    rows = np.flatnonzero(part == np.bincount(part, minlength=1).argmax())
    scaled = search.field.value / np.sqrt(search.field.variance)[:, None]
    best = _best_groups(scaled[rows], touching[rows][:, rows])
    if best is None:
        nothing = float("nan")
        return SecondOpinion(
            n_sites=len(rows), n_groups=0, criterion=nothing, agreement=nothing
        )
    label, criterion = best
    return SecondOpinion(
        n_sites=len(rows),
        n_groups=int(label.max()) + 1,
        criterion=criterion,
        agreement=adjusted_rand_index(search.label[rows], label),
    )


def _best_groups(values: Floats, touching: Any) -> tuple[Integers, float] | None:
    """Return the groups with the largest index; None where there is nothing to part."""
    if len(values) < FEWEST_ROWS or not np.ptp(values, axis=0).any():
        return None
    # Imported here alone: it costs more time than most analyses, and few ask for it.
    from sklearn.cluster import AgglomerativeClustering  # noqa: PLC0415
    from sklearn.metrics import calinski_harabasz_score  # noqa: PLC0415

    tree = AgglomerativeClustering(
        n_clusters=None, distance_threshold=0.0, connectivity=touching, linkage="ward"
    )
    merges = tree.fit(values).children_
    best: tuple[Integers, float] | None = None
    for n_groups in range(2, min(MOST_GROUPS, len(values) - 1) + 1):
        label = _cut(merges, len(values), n_groups)
        score = float(calinski_harabasz_score(values, label))
        if best is None or score > best[1]:
            best = label, score
    return best


def _cut(merges: Integers, n_rows: int, n_groups: int) -> Integers:
    """Return the groups that are left when the last merges are not made."""
    made = n_rows - n_groups
    top = np.arange(n_rows + made)
    for step in range(made - 1, -1, -1):
        top[merges[step]] = top[n_rows + step]
    out: Integers = np.unique(top[:n_rows], return_inverse=True)[1]
    return out
