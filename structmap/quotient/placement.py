"""Laying nodes of a quotient graph out in space, molecules first."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import breadth_first_order, connected_components

from structmap.contacts import KINDS
from structmap.quotient.elements import Elements
from structmap.records import store_read_only


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Edges:
    """Edges of a labelled quotient graph.

    Attributes
    ----------
    first, second : ndarray of int, shape (n_edges,)
        Nodes. Where the first stands at G, the second stands at G · element.
    element : ndarray
        One row of `Elements` an edge.
    kind : ndarray of int, shape (n_edges,)
        ``CHAIN``, ``COMPLEX`` or ``LATTICE``.
    """

    first: NDArray[np.int64]
    second: NDArray[np.int64]
    element: NDArray[Any]
    kind: NDArray[np.int64]

    def __post_init__(self) -> None:
        for name in ("first", "second", "kind"):
            store_read_only(self, name, np.int64, (len(self.element),))

    def where(self, keep: NDArray[np.bool_]) -> "Edges":
        """Return some of the edges.

        Parameters
        ----------
        keep : ndarray of bool, shape (n_edges,)
            Which stay.

        Returns
        -------
        Edges
            The others are left out.
        """
        return Edges(
            first=self.first[keep],
            second=self.second[keep],
            element=self.element[keep],
            kind=self.kind[keep],
        )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Placement:
    """Where nodes stand when connected parts are laid out.

    Attributes
    ----------
    element : ndarray
        One row of `Elements` a node; the root of each part stands at the identity.
    part : ndarray of int, shape (n_nodes,)
        Connected part of each node.
    n_parts : int
    """

    element: NDArray[Any]
    part: NDArray[np.int64]
    n_parts: int

    def __post_init__(self) -> None:
        store_read_only(self, "part", np.int64, (None,))


def place_nodes(n_nodes: int, edges: Edges, *, elements: Elements) -> Placement:
    """Lay every connected part of a quotient graph out.

    Chain edges are walked first, then complex, then lattice edges, each breadth first,
    so that no molecule is torn apart; the largest piece is the root of its part.

    Parameters
    ----------
    n_nodes : int
        Number of nodes.
    edges : Edges
        Between those nodes.
    elements : Elements
        Arithmetic of their elements.

    Returns
    -------
    Placement
        One element a node.
    """
    part, place = np.arange(n_nodes), elements.identity(n_nodes)
    for kind in range(len(KINDS)):
        chosen = edges.where(edges.kind == kind)
        step = _relative(chosen, place, elements)
        weight = np.bincount(part)
        joined = Edges(
            first=part[chosen.first],
            second=part[chosen.second],
            element=step,
            kind=chosen.kind,
        )
        above = _place_by_trees(weight, joined, elements)
        place = elements.product(above.element[part], place)
        part = above.part[part]
    n_parts = int(part.max()) + 1 if n_nodes else 0
    return Placement(element=place, part=part, n_parts=n_parts)


def _relative(edges: Edges, place: NDArray[Any], elements: Elements) -> NDArray[Any]:
    """Return G(first) · element · G(second)^-1 of each edge."""
    forward = elements.product(place[edges.first], edges.element)
    return elements.product(forward, elements.inverse(place[edges.second]))


def _place_by_trees(
    weight: NDArray[np.int64], edges: Edges, elements: Elements
) -> Placement:
    """Lay out by one breadth-first tree a part, each rooted at its heaviest node."""
    n_nodes = len(weight)
    place = elements.identity(n_nodes)
    between = edges.where(edges.first != edges.second)
    ends = np.concatenate([between.first, between.second])
    others = np.concatenate([between.second, between.first])
    keys, edge = np.unique(ends * n_nodes + others, return_index=True)
    part = connected_components(_adjacency(ends, others, n_nodes), directed=False)[
        1
    ].astype(np.int64)
    heaviest = np.lexsort((np.arange(n_nodes), -weight, part))
    roots = heaviest[np.unique(part[heaviest], return_index=True)[1]]
    for parents, children in _levels(ends, others, roots, n_nodes):
        used = edge[np.searchsorted(keys, parents * n_nodes + children)]
        backward = used >= len(between.first)
        step = between.element[used % max(len(between.first), 1)]
        step[backward] = elements.inverse(step[backward])
        place[children] = elements.product(place[parents], step)
    return Placement(element=place, part=part, n_parts=len(roots))


def _adjacency(
    ends: NDArray[np.int64], others: NDArray[np.int64], n_nodes: int
) -> csr_array:
    ones = np.ones(len(ends), dtype=np.int8)
    return csr_array((ones, (ends, others)), shape=(n_nodes, n_nodes))


def _levels(
    ends: NDArray[np.int64],
    others: NDArray[np.int64],
    roots: NDArray[np.int64],
    n_nodes: int,
) -> list[tuple[NDArray[np.int64], NDArray[np.int64]]]:
    """Return parents and children of breadth-first trees, one level at a time."""
    above = np.full(len(roots), n_nodes)  # one node above all roots: a single search
    adjacency = _adjacency(
        np.concatenate([ends, above]), np.concatenate([others, roots]), n_nodes + 1
    )
    order, parent = breadth_first_order(adjacency, n_nodes, directed=True)
    rank = np.empty(n_nodes + 1, dtype=np.int64)
    rank[order] = np.arange(len(order))
    rank_of_parent = rank[parent[order[1 + len(roots) :]]]
    levels, end = [], 1 + len(roots)
    while end < len(order):
        # Ranks of parents rise along the order, so a level is one slice of it.
        stop = 1 + len(roots) + int(np.searchsorted(rank_of_parent, end))
        children = order[end:stop].astype(np.int64)
        levels.append((parent[children].astype(np.int64), children))
        end = stop
    return levels


def cycle_elements(
    edges: Edges, placement: Placement, *, elements: Elements
) -> tuple[NDArray[Any], NDArray[np.int64]]:
    """Return the elements that map a laid-out part onto itself, one an edge.

    Parameters
    ----------
    edges : Edges
        Between those nodes.
    placement : Placement
        Of the nodes of these edges.
    elements : Elements
        Their arithmetic.

    Returns
    -------
    element : ndarray
        Rows other than the identity.
    part : ndarray of int
        The part that each belongs to.
    """
    around = _relative(edges, placement.element, elements)
    moves = ~elements.is_identity(around)
    return around[moves], placement.part[edges.first[moves]]
