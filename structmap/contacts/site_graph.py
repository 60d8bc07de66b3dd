"""From contacts of residues to the graph of measured sites."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from structmap.contacts.record import CHAIN, Contacts, SiteGraph

if TYPE_CHECKING:
    from structmap.sites import Sites


def make_site_graph(
    contacts: Contacts, sites: Sites, *, cutoff_angstrom: float
) -> SiteGraph:
    """Return which measured sites touch, in any copy and image.

    Parameters
    ----------
    contacts : Contacts
        Contacts as found.
    sites : Sites
        Several sites may share a residue; they are joined by a `chain` edge of length
        0.
    cutoff_angstrom : float
        Longest contact that counts.

    Returns
    -------
    SiteGraph
        Contacts of a site with its own images are no edges, nor are contacts with a
        residue whose prediction is not to be interpreted.
    """
    near = contacts.distance_angstrom <= cutoff_angstrom
    keep = np.flatnonzero(near & contacts.joins)
    pairs = _site_pairs(sites, contacts.residue_1[keep], contacts.residue_2[keep])
    contact, first, second = pairs
    kind = contacts.kind[keep][contact]
    distance = contacts.distance_angstrom[keep][contact]
    weak = contacts.weak[keep][contact]
    n_residues = int(max(sites.copy_residue.max(initial=-1), -1)) + 1
    every = np.arange(n_residues)
    _, one, other = _site_pairs(sites, every, every)
    first, second = np.concatenate([first, one]), np.concatenate([second, other])
    kind = np.concatenate([kind, np.full(len(one), CHAIN)])
    distance = np.concatenate([distance, np.zeros(len(one))])
    weak = np.concatenate([weak, np.zeros(len(one), dtype=np.bool_)])
    edge = first != second
    return _collapsed(
        int(sites.copy_site.max(initial=-1)) + 1,
        np.minimum(first, second)[edge],
        np.maximum(first, second)[edge],
        kind=kind[edge],
        distance=distance[edge],
        weak=weak[edge],
    )


def _site_pairs(
    sites: Sites, residue_1: NDArray[np.int64], residue_2: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Return all pairs of sites on pairs of residues, and which pair each is of."""
    order = np.argsort(sites.copy_residue, kind="stable")
    residue, site = sites.copy_residue[order], sites.copy_site[order]

    def spread(
        wanted: NDArray[np.int64],
    ) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        start = np.searchsorted(residue, wanted, side="left")
        count = np.searchsorted(residue, wanted, side="right") - start
        row = np.repeat(np.arange(len(wanted)), count)
        within = np.arange(len(row)) - np.repeat(np.cumsum(count) - count, count)
        return row, site[start[row] + within]

    row, first = spread(residue_1)
    second_row, second = spread(residue_2[row])
    return row[second_row], first[second_row], second


def _collapsed(
    n_sites: int,
    first: NDArray[np.int64],
    second: NDArray[np.int64],
    *,
    kind: NDArray[np.int64],
    distance: NDArray[np.float64],
    weak: NDArray[np.bool_],
) -> SiteGraph:
    order = np.lexsort((second, first))
    first, second = first[order], second[order]
    new = (np.diff(first, prepend=-1) != 0) | (np.diff(second, prepend=-1) != 0)
    start = np.flatnonzero(new)
    if not start.size:
        kind, distance, weak = kind[:0], distance[:0], weak[:0]
    else:
        kind = np.minimum.reduceat(kind[order], start)
        distance = np.minimum.reduceat(distance[order], start)
        weak = np.logical_and.reduceat(weak[order], start)
    return SiteGraph(
        n_sites=n_sites,
        site_1=first[start],
        site_2=second[start],
        kind=kind,
        distance_angstrom=distance,
        weak=weak,
    )
