"""The weakest link: the fewest contacts without which a unit falls apart."""

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import breadth_first_order, maximum_flow

from structmap.contacts import Contacts
from structmap.records import store_read_only
from structmap.sites import Sites

Weigh = Literal["residues", "atoms"]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class WeakestLink:
    """The fewest contacts without which a unit falls into two.

    Attributes
    ----------
    contacts : ndarray of int, shape (n,)
        Their indices; empty when the unit is apart without removing any.
    n_residue_contacts, n_atom_contacts : int
        How many residue contacts and atom pairs these are, all copies of the
        asymmetric unit together.
    sides : tuple of tuple of int
        The two parts as rising indices of sites, the larger first.
    """

    contacts: NDArray[np.int64]
    n_residue_contacts: int
    n_atom_contacts: int
    sides: tuple[tuple[int, ...], tuple[int, ...]]

    def __post_init__(self) -> None:
        store_read_only(self, "contacts", np.int64, (None,))


def find_weakest_link(
    members: NDArray[np.int64],
    sites: Sites,
    *,
    contacts: Contacts,
    apart: Sequence[Sequence[int]] = (),
    weigh: Weigh = "residues",
) -> WeakestLink:
    """Find the fewest contacts to remove so that a unit falls apart.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites, two at least.
    sites : Sites
        The measured sites.
    contacts : Contacts
        Within the cutoff; those between any copies of two members count that may join
        them, see `Contacts.joins`.
    apart : sequence of sequence of int, optional
        Groups of members of which two must come apart, such as what is left of the
        unit without lattice contacts; without them any split counts, also that of a
        single member.
    weigh : {'residues', 'atoms'}, default 'residues'
        Whether residue contacts or atom pairs are to be as few as possible.

    Returns
    -------
    WeakestLink
        Of several equal ones that which parts the unit most evenly among those found.

    Raises
    ------
    ValueError
        If there are fewer than two members, or groups that overlap or are not made of
        members.

    Notes
    -----
    A minimum cut of the graph of members: over all splits by the algorithm of Stoer
    and Wagner [1]_, between groups by the largest flow from one to the other [2]_.

    References
    ----------
    .. [1] Stoer and Wagner, J. ACM 44, 585 (1997).
    .. [2] Ford and Fulkerson, Can. J. Math. 8, 399 (1956).
    """
    members = np.unique(members)
    groups = [np.searchsorted(members, np.unique(group)) for group in apart]
    _check(members, apart, groups)
    pairs = _contacts_of_members(members, sites, contacts)
    weight = _weights(len(members), pairs, contacts, weigh)
    if groups:
        side = min(
            (_cut_between(weight, *two) for two in itertools.combinations(groups, 2)),
            key=lambda side: _rank(weight, side),
        )
    else:
        side = smallest_cut(weight)
    cut = np.unique(pairs[side[pairs[:, 1]] != side[pairs[:, 2]], 0])
    parts = members[side], members[~side]
    larger, smaller = sorted(
        (tuple(part.tolist()) for part in parts), key=lambda part: (-len(part), part)
    )
    return WeakestLink(
        contacts=cut,
        n_residue_contacts=len(cut),
        n_atom_contacts=int(contacts.n_atom_pairs[cut].sum()),
        sides=(larger, smaller),
    )


def _check(
    members: NDArray[np.int64],
    apart: Sequence[Sequence[int]],
    groups: list[NDArray[np.int64]],
) -> None:
    if len(members) < 2:
        raise ValueError(f"members are {members.tolist()}; one alone cannot fall apart")
    if not apart:
        return
    listed = np.concatenate([np.unique(group) for group in apart])
    if len(np.unique(listed)) < len(listed) or not np.isin(listed, members).all():
        raise ValueError("groups in apart must be parts of the members without overlap")
    if len(groups) < 2 or min(len(group) for group in groups) < 1:
        raise ValueError(
            f"apart holds {len(apart)} groups; give two or more, none empty"
        )


def _contacts_of_members(
    members: NDArray[np.int64], sites: Sites, contacts: Contacts
) -> NDArray[np.int64]:
    """Return (contact, member, member) of every contact between copies of members."""
    of_residue: dict[int, list[int]] = {}
    for site, residue in zip(sites.copy_site, sites.copy_residue, strict=True):
        if site in members:
            place = int(np.searchsorted(members, site))
            of_residue.setdefault(int(residue), []).append(place)
    own = np.array(sorted(of_residue), dtype=np.int64)
    inside = np.isin(contacts.residue_1, own) & np.isin(contacts.residue_2, own)
    inside &= contacts.joins
    rows = [
        (contact, first, second)
        for contact in np.flatnonzero(inside).tolist()
        for first in of_residue[int(contacts.residue_1[contact])]
        for second in of_residue[int(contacts.residue_2[contact])]
        if first != second
    ]
    return np.array(rows, dtype=np.int64).reshape(-1, 3)


def _weights(
    n_members: int, pairs: NDArray[np.int64], contacts: Contacts, weigh: Weigh
) -> NDArray[np.int64]:
    atoms = np.maximum(contacts.n_atom_pairs[pairs[:, 0]], 1)
    each = np.ones_like(atoms) if weigh == "residues" else atoms
    weight = np.zeros((n_members, n_members), dtype=np.int64)
    np.add.at(weight, (pairs[:, 1], pairs[:, 2]), each)
    return weight + weight.T


def _rank(weight: NDArray[np.int64], side: NDArray[np.bool_]) -> tuple[int, int]:
    """Return what a cut costs and, smaller for an even one, how uneven it is."""
    uneven = abs(2 * int(side.sum()) - len(side))
    return int(weight[side][:, ~side].sum()), uneven


def smallest_cut(weight: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return the split of a graph that cuts least.

    Parameters
    ----------
    weight : ndarray of int, shape (n, n)
        Symmetric, 0 or more; the diagonal does not count.

    Returns
    -------
    ndarray of bool, shape (n,)
        One side; neither is empty.

    Raises
    ------
    ValueError
        If there are fewer than two nodes.
    """
    n_nodes = len(weight)
    if n_nodes < 2:
        raise ValueError(f"the graph has {n_nodes} nodes; it must have two or more")
    merged = weight.copy()
    np.fill_diagonal(merged, 0)
    inside = np.eye(n_nodes, dtype=np.bool_)
    alive = np.ones(n_nodes, dtype=np.bool_)
    best, found = (np.iinfo(np.int64).max, 0), inside[0]
    while alive.sum() > 1:
        before, last, cost = _phase(merged, alive)
        rank = cost, abs(2 * int(inside[last].sum()) - n_nodes)
        if rank < best:
            best, found = rank, inside[last].copy()
        merged[before] += merged[last]
        merged[:, before] += merged[:, last]
        merged[before, before] = 0
        inside[before] |= inside[last]
        alive[last] = False
    return np.asarray(found)


def _phase(weight: NDArray[np.int64], alive: NDArray[np.bool_]) -> tuple[int, int, int]:
    """Add the most tightly bound node until all are in: the last two and a cut."""
    reach = np.where(alive, 0, -1)
    open_nodes, before, last, cost = alive.copy(), -1, -1, 0
    for _ in range(int(alive.sum())):
        node = int(np.argmax(np.where(open_nodes, reach, -1)))
        before, last, cost = last, node, int(reach[node])
        open_nodes[node] = False
        reach = reach + np.where(open_nodes, weight[node], 0)
    return before, last, cost


def _cut_between(
    weight: NDArray[np.int64], first: NDArray[np.int64], second: NDArray[np.int64]
) -> NDArray[np.bool_]:
    """Return the side of the first group in the smallest cut between two groups."""
    n_nodes = len(weight)
    bound = int(weight.sum()) + 1  # more than any cut
    source, sink = n_nodes, n_nodes + 1
    capacity = np.zeros((n_nodes + 2, n_nodes + 2), dtype=np.int32)
    capacity[:n_nodes, :n_nodes] = weight
    capacity[source, first] = capacity[first, source] = bound
    capacity[second, sink] = capacity[sink, second] = bound
    flow = maximum_flow(csr_array(capacity), source, sink).flow.toarray()
    residual = csr_array((capacity - flow > 0).astype(np.int8))
    reached = breadth_first_order(residual, source, return_predecessors=False)
    side = np.zeros(n_nodes + 2, dtype=np.bool_)
    side[reached] = True
    return np.asarray(side[:n_nodes])
