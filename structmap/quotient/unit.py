"""Laying a motional unit out over images, each site once, and what it closes to."""

import heapq
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import KINDS, Contacts
from structmap.quotient.closure import Closure
from structmap.quotient.elements import (
    CrystalElements,
    Elements,
    elements_of_contacts,
    make_elements,
)
from structmap.quotient.placement import Edges, Placement, cycle_elements, place_nodes
from structmap.records import store_read_only
from structmap.sites import Sites
from structmap.structure import Structure


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class UnitLevel:
    """A unit held by contacts up to one kind.

    Attributes
    ----------
    kind : str
        ``chain``, ``complex`` or ``lattice``.
    is_covered : bool
        Whether these contacts hold a copy of every member together.
    n_covering : int
        Parts of the asymmetric unit that hold a copy of every member.
    n_copies : int
        Copies that the member with most copies has.
    closure : Closure
        Of the part with most members.
    """

    kind: str
    is_covered: bool
    n_covering: int
    n_copies: int
    closure: Closure


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class UnitLayout:
    """Where the members of a unit stand when it is drawn in one piece.

    Attributes
    ----------
    site : ndarray of int, shape (n_members,)
        The members, rising.
    residue : ndarray of int, shape (n_members,)
        The copy of each that is drawn.
    operator : ndarray of int, shape (n_members,)
        Operator of the crystal that makes its image; -1 where only an assembly does.
    shift : ndarray of int, shape (n_members, 3)
        Whole cells.
    transform : ndarray of float, shape (n_members, 4, 4)
        The same as a Cartesian transform in Å.
    is_reached : ndarray of bool, shape (n_members,)
        Whether contacts join it to the others; one that is not stands as in the file.
    closes : str
        ``finite``, ``ring`` (it closes through its own images), ``rod``, ``layer`` or
        ``net`` (it goes on through the crystal), with all kinds of contact.
    order : int
        Number of rotation parts; of a ring, the number of images in it.
    periods : ndarray of float, shape (n_periods, 3)
        Translations in cell edges after which it comes back.
    levels : tuple of UnitLevel
        With chain, with chain and complex, with all contacts.
    """

    site: NDArray[np.int64]
    residue: NDArray[np.int64]
    operator: NDArray[np.int64]
    shift: NDArray[np.int64]
    transform: NDArray[np.float64]
    is_reached: NDArray[np.bool_]
    closes: str
    order: int
    periods: NDArray[np.float64]
    levels: tuple[UnitLevel, ...]

    def __post_init__(self) -> None:
        n_members = len(self.site)
        for name in ("site", "residue", "operator"):
            store_read_only(self, name, np.int64, (n_members,))
        store_read_only(self, "shift", np.int64, (n_members, 3))
        store_read_only(self, "transform", np.float64, (n_members, 4, 4))
        store_read_only(self, "is_reached", np.bool_, (n_members,))
        store_read_only(self, "periods", np.float64, (None, 3))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Copies:
    """The copies of the members and the contacts between them."""

    site: NDArray[np.int64]
    residue: NDArray[np.int64]
    edges: Edges
    elements: Elements


def lay_out_unit(
    members: NDArray[np.int64],
    structure: Structure,
    *,
    sites: Sites,
    contacts: Contacts,
) -> UnitLayout:
    """Lay a unit out over images and tell what it closes to.

    Only contacts between copies of members count. From the largest piece of one chain
    the drawing grows along chain contacts, then complex, then lattice contacts; each
    site is drawn once.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites that have a residue.
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    contacts : Contacts
        Within the cutoff.

    Returns
    -------
    UnitLayout
        One place a member, and what the unit closes to.

    Raises
    ------
    ValueError
        If there are no members, or one has no residue.
    """
    copies = _copies_of(members, structure, sites=sites, contacts=contacts)
    missing = sorted(set(members.tolist()) - set(copies.site.tolist()))
    if missing or not len(members):
        raise ValueError(f"members {missing} have no residue; leave them out")
    levels = tuple(_level(copies, kind) for kind in range(len(KINDS)))
    placement = place_nodes(len(copies.site), copies.edges, elements=copies.elements)
    drawn = _grow(copies, _root(copies))
    node, element, reached = _complete(copies, placement, drawn)
    exact = isinstance(copies.elements, CrystalElements)
    rows = element if exact else np.tile([-1, 0, 0, 0], (len(node), 1))
    if not exact:
        rows[copies.elements.is_identity(element), 0] = 0
    return UnitLayout(
        site=copies.site[node],
        residue=copies.residue[node],
        operator=rows[:, 0],
        shift=rows[:, 1:],
        transform=copies.elements.transforms(element),
        is_reached=reached,
        closes=levels[-1].closure.closes,
        order=levels[-1].closure.order,
        periods=levels[-1].closure.periods,
        levels=levels,
    )


def _copies_of(
    members: NDArray[np.int64],
    structure: Structure,
    *,
    sites: Sites,
    contacts: Contacts,
) -> _Copies:
    chosen = np.isin(sites.copy_site, members)
    site, residue = sites.copy_site[chosen], sites.copy_residue[chosen]
    # Sites of one residue (two atoms of it) are apart by nothing.
    by_residue = np.argsort(residue, kind="stable")
    bounds = np.searchsorted(
        residue[by_residue], [contacts.residue_1, contacts.residue_2]
    )
    ends = np.searchsorted(
        residue[by_residue], [contacts.residue_1, contacts.residue_2], side="right"
    )
    inside = np.flatnonzero((ends > bounds).all(axis=0) & contacts.joins)
    pairs = _node_pairs(by_residue, bounds[:, inside], ends[:, inside])
    elements = make_elements(structure, contacts)
    label = elements_of_contacts(structure, contacts, elements=elements, indices=inside)
    same = _same_residue(by_residue, residue)
    edges = Edges(
        first=np.concatenate([pairs[:, 1], same[:, 0]]),
        second=np.concatenate([pairs[:, 2], same[:, 1]]),
        element=np.concatenate([label[pairs[:, 0]], elements.identity(len(same))]),
        kind=np.concatenate(
            [contacts.kind[inside][pairs[:, 0]], np.zeros(len(same), dtype=np.int64)]
        ),
    )
    return _Copies(site=site, residue=residue, edges=edges, elements=elements)


def _node_pairs(
    order: NDArray[np.int64], start: NDArray[np.int64], end: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Return (contact, node of its first, node of its second residue)."""
    rows = [
        (contact, order[one], order[two])
        for contact in range(start.shape[1])
        for one in range(start[0, contact], end[0, contact])
        for two in range(start[1, contact], end[1, contact])
    ]
    return np.array(rows, dtype=np.int64).reshape(-1, 3)


def _same_residue(
    order: NDArray[np.int64], residue: NDArray[np.int64]
) -> NDArray[np.int64]:
    same = residue[order[1:]] == residue[order[:-1]]
    return np.column_stack([order[:-1][same], order[1:][same]])


def _level(copies: _Copies, highest_kind: int) -> UnitLevel:
    edges = copies.edges.where(copies.edges.kind <= highest_kind)
    placement = place_nodes(len(copies.site), edges, elements=copies.elements)
    pairs = np.unique(np.column_stack([placement.part, copies.site]), axis=0)
    n_sites_of_part = np.bincount(pairs[:, 0])
    largest = int(np.argmax(n_sites_of_part))
    around, owner = cycle_elements(edges, placement, elements=copies.elements)
    n_covering = int((n_sites_of_part == len(np.unique(copies.site))).sum())
    return UnitLevel(
        kind=KINDS[highest_kind],
        is_covered=n_covering > 0,
        n_covering=n_covering,
        n_copies=int(np.unique(copies.site, return_counts=True)[1].max()),
        closure=copies.elements.close(
            copies.elements.distinct(around[owner == largest])
        ),
    )


def _root(copies: _Copies) -> int:
    """Return the first node of the piece that holds most sites by chain contacts."""
    edges = copies.edges.where(copies.edges.kind == 0)
    part = place_nodes(len(copies.site), edges, elements=copies.elements).part
    pairs = np.unique(np.column_stack([part, copies.site]), axis=0)
    largest = int(np.argmax(np.bincount(pairs[:, 0])))
    return int(np.flatnonzero(part == largest)[0])


def _grow(copies: _Copies, root: int) -> dict[int, tuple[int, NDArray[Any]]]:
    """Return node and element of each site that is reached while each comes once."""
    edges = copies.edges
    touching: list[list[tuple[int, bool]]] = [[] for _ in copies.site]
    for index, ends in enumerate(zip(edges.first, edges.second, strict=True)):
        touching[int(ends[0])].append((index, True))
        touching[int(ends[1])].append((index, False))
    drawn: dict[int, tuple[int, NDArray[Any]]] = {}
    heap: list[tuple[int, int, int, int, bool]] = [(0, 0, -1, root, True)]
    while heap:
        _, depth, index, node, forward = heapq.heappop(heap)
        site = int(copies.site[node])
        if site in drawn:
            continue
        drawn[site] = node, _step(copies, drawn, index, forward)
        for following, onward in touching[node]:
            other = edges.second[following] if onward else edges.first[following]
            entry = int(edges.kind[following]), depth + 1, following, int(other), onward
            if int(copies.site[other]) not in drawn:
                heapq.heappush(heap, entry)
    return drawn


def _step(
    copies: _Copies,
    drawn: dict[int, tuple[int, NDArray[Any]]],
    index: int,
    forward: bool,  # noqa: FBT001
) -> NDArray[Any]:
    elements = copies.elements
    if index < 0:
        return elements.identity(1)
    edges = copies.edges
    label = edges.element[index : index + 1]
    before = edges.first[index] if forward else edges.second[index]
    standing = drawn[int(copies.site[before])][1]
    return elements.product(standing, label if forward else elements.inverse(label))


def _complete(
    copies: _Copies,
    placement: Placement,
    drawn: dict[int, tuple[int, NDArray[Any]]],
) -> tuple[NDArray[np.int64], NDArray[Any], NDArray[np.bool_]]:
    """Add the sites that can only be reached past another copy, or not at all."""
    elements = copies.elements
    root, standing = next(iter(drawn.values()))
    to_root = elements.product(standing, elements.inverse(placement.element[[root]]))
    nodes, places, reached = [], [], []
    for site in np.unique(copies.site).tolist():
        own = np.flatnonzero(copies.site == site)
        joined = own[placement.part[own] == placement.part[root]]
        node, place = int(own[0]), elements.identity(1)
        if site in drawn:
            node, place = drawn[site]
        elif len(joined):
            node = int(joined[0])
            place = elements.product(to_root, placement.element[[node]])
        nodes.append(node)
        places.append(place)
        reached.append(len(joined) > 0)
    return np.array(nodes), np.concatenate(places), np.array(reached)
