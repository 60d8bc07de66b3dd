"""What holds a motional unit together: the molecule, the assembly or the crystal."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    Contacts,
    SiteGraph,
    find_contacts,
    inverse_elements,
    operator_text,
)
from structmap.records import store_read_only
from structmap.sites import Sites
from structmap.structure import Assembly, Crystal, Structure

JOINING_REACH_ANGSTROM = 16.0
SMALLEST_PIECE = 3
SHARE_NEEDED = 0.8


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LatticeVerdict:
    """What holds a motional unit together.

    Attributes
    ----------
    verdict : str
        ``internal``, ``interface``, ``lattice-joined`` or ``lattice-only``.
    operators : tuple of str
        The operators and shifts that join it across the crystal,
        ``-x,y+1/2,-z+1/2 [1 0 0]``; empty when none is needed.
    contacts : ndarray of int, shape (n,)
        Indices into the contacts: the lattice contacts between its pieces.
    share_kept_without_lattice : float
        Size of the largest piece without lattice contacts over the size of the unit.
    pieces_without_lattice : tuple of tuple of int
        The pieces, largest first, as indices of sites.
    joining_distance_angstrom : tuple of float
        Smallest cutoff at which chain contacts, then also complex, then also lattice
        contacts hold all members together; NaN beyond 16 Å.
    """

    verdict: str
    operators: tuple[str, ...]
    contacts: NDArray[np.int64]
    share_kept_without_lattice: float
    pieces_without_lattice: tuple[tuple[int, ...], ...]
    joining_distance_angstrom: tuple[float, float, float]

    def __post_init__(self) -> None:
        store_read_only(self, "contacts", np.int64, (None,))


def judge_lattice(
    members: NDArray[np.int64],
    graph: SiteGraph,
    *,
    structure: Structure,
    sites: Sites,
    contacts: Contacts,
    assemblies: Sequence[Assembly],
) -> LatticeVerdict:
    """Tell what holds the members of a unit together.

    A spanning forest of the unit that prefers chain edges, then complex, then lattice
    edges needs one edge less than there are members. In this order: ``lattice-joined``
    when only lattice edges join at least two pieces of three or more members;
    ``internal`` when at least 80 % of the needed edges are chain edges; ``interface``
    when chain and complex edges together are; ``lattice-only`` otherwise.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    graph : SiteGraph
        Which sites touch within the cutoff.
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    contacts : Contacts
        All contacts within the cutoff.
    assemblies : sequence of Assembly
        Assemblies whose contacts are complex.

    Returns
    -------
    LatticeVerdict
        The verdict, what joins the unit and what is left without the crystal.
    """
    pieces = connected_pieces(members, graph, highest_kind=COMPLEX)
    joining = _contacts_between(pieces, sites, contacts)
    return LatticeVerdict(
        verdict=verdict_by_graph(members, graph),
        operators=_operators(structure, contacts, joining),
        contacts=joining,
        share_kept_without_lattice=len(pieces[0]) / len(members),
        pieces_without_lattice=pieces,
        joining_distance_angstrom=joining_distances(
            members, structure, sites=sites, assemblies=assemblies
        ),
    )


def verdict_by_graph(members: NDArray[np.int64], graph: SiteGraph) -> str:
    """Return what holds a unit together, by the rules of `judge_lattice`.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    graph : SiteGraph
        Which sites touch within some cutoff.

    Returns
    -------
    str
        ``internal``, ``interface``, ``lattice-joined`` or ``lattice-only``.
    """
    n_members = len(members)
    pieces = connected_pieces(members, graph, highest_kind=COMPLEX)
    n_chain_parts = len(connected_pieces(members, graph, highest_kind=CHAIN))
    needed = SHARE_NEEDED * (n_members - 1)
    if sum(len(piece) >= SMALLEST_PIECE for piece in pieces) > 1:
        return "lattice-joined"
    if n_members - n_chain_parts >= needed:
        return "internal"
    if n_members - len(pieces) >= needed:
        return "interface"
    return "lattice-only"


def connected_pieces(
    members: NDArray[np.int64], graph: SiteGraph, *, highest_kind: int
) -> tuple[tuple[int, ...], ...]:
    """Return the parts into which edges up to a kind join the members.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    graph : SiteGraph
        Which sites touch.
    highest_kind : int
        ``CHAIN``, ``COMPLEX`` or ``LATTICE``.

    Returns
    -------
    tuple of tuple of int
        Indices of sites, the largest part first.
    """
    place = np.full(max(graph.n_sites, int(members.max()) + 1), -1)
    place[members] = np.arange(len(members))
    first, second = place[graph.site_1], place[graph.site_2]
    kept = (first >= 0) & (second >= 0) & (graph.kind <= highest_kind)
    labels = _part_of_node(first[kept], second[kept], len(members))
    parts = [tuple(members[labels == part].tolist()) for part in np.unique(labels)]
    return tuple(sorted(parts, key=lambda part: (-len(part), part)))


def _part_of_node(
    first: NDArray[np.int64], second: NDArray[np.int64], n_nodes: int
) -> NDArray[Any]:
    adjacency = coo_array(
        (np.ones(len(first)), (first, second)), shape=(n_nodes, n_nodes)
    )
    labels: NDArray[Any] = connected_components(adjacency, directed=False)[1]
    return labels


def _contacts_between(
    pieces: tuple[tuple[int, ...], ...], sites: Sites, contacts: Contacts
) -> NDArray[np.int64]:
    """Return the lattice contacts whose two residues belong to different pieces."""
    if len(pieces) < 2:
        return np.zeros(0, dtype=np.int64)
    piece_of_site = np.full(len(sites.name), -1)
    for index, piece in enumerate(pieces):
        piece_of_site[list(piece)] = index
    n_residues = 1 + max(
        int(sites.copy_residue.max()),
        int(contacts.residue_1.max()),
        int(contacts.residue_2.max()),
    )
    piece_of_residue = np.full(n_residues, -1)
    in_unit = piece_of_site[sites.copy_site] >= 0
    piece_of_residue[sites.copy_residue[in_unit]] = piece_of_site[
        sites.copy_site[in_unit]
    ]
    first, second = (
        piece_of_residue[contacts.residue_1],
        piece_of_residue[contacts.residue_2],
    )
    joins = (
        (first >= 0) & (second >= 0) & (first != second) & (contacts.kind == LATTICE)
    )
    return np.flatnonzero(joins)


def _operators(
    structure: Structure, contacts: Contacts, indices: NDArray[np.int64]
) -> tuple[str, ...]:
    texts = {operator_text(structure, contacts, int(index)) for index in indices}
    return tuple(sorted(text or "x,y,z [0 0 0]" for text in texts))


def joining_distances(
    members: NDArray[np.int64],
    structure: Structure,
    *,
    sites: Sites,
    assemblies: Sequence[Assembly],
) -> tuple[float, float, float]:
    """Return the cutoffs at which each kind of contact holds a set of sites together.

    Edges between copies of the members are added by rising distance until one component
    holds a copy of every member; first chain contacts alone, then with complex, then
    with lattice contacts.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    assemblies : sequence of Assembly
        Assemblies whose contacts are complex.

    Returns
    -------
    tuple of float
        Distances in Å for chain, complex and lattice; NaN beyond 16 Å.
    """
    chosen = np.isin(sites.copy_site, members)
    residues, owners = sites.copy_residue[chosen], sites.copy_site[chosen]
    found = find_contacts(
        _only_residues(structure, residues),
        reach_angstrom=JOINING_REACH_ANGSTROM,
        assemblies=assemblies,
    )
    chain, both, all_kinds = (
        _covering_distance(found, residues, owners, kind)
        for kind in (CHAIN, COMPLEX, LATTICE)
    )
    return chain, both, all_kinds


def _only_residues(structure: Structure, residues: NDArray[np.int64]) -> Structure:
    """Return the structure with the atoms of these residues alone."""
    keep = np.isin(structure.residue_of_atom, residues)
    arrays = ("position", "residue_of_atom", "model_of_atom", "atom_name", "element")
    more = ("altloc", "occupancy", "b_iso")
    return replace(
        structure, **{name: getattr(structure, name)[keep] for name in arrays + more}
    )


def _covering_distance(
    found: Contacts,
    residues: NDArray[np.int64],
    owners: NDArray[np.int64],
    highest_kind: int,
) -> float:
    """Return the shortest reach at which one component covers every owner."""
    nodes, node_of_copy = np.unique(residues, return_inverse=True)
    first = np.searchsorted(nodes, found.residue_1)
    second = np.searchsorted(nodes, found.residue_2)
    allowed = (found.kind <= highest_kind) & found.joins
    steps = np.unique(found.distance_angstrom[allowed])
    low, high = 0, len(steps)
    while low < high:
        middle = (low + high) // 2
        within = allowed & (found.distance_angstrom <= steps[middle])
        labels = _part_of_node(first[within], second[within], len(nodes))[node_of_copy]
        if _covers(labels, owners):
            high = middle
        else:
            low = middle + 1
    if len(np.unique(owners)) == 1:
        return 0.0
    return float(steps[low]) if low < len(steps) else float("nan")


def _covers(labels: NDArray[Any], owners: NDArray[np.int64]) -> bool:
    pairs = np.unique(np.stack([labels, owners]), axis=1)
    return bool(np.bincount(pairs[0]).max() == len(np.unique(owners)))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CrystalContact:
    """A neighbour in the crystal: one operator with its shift, and its inverse.

    Attributes
    ----------
    numeral : str
        Roman numeral, I for the neighbour with most residue contacts.
    operator : int
        Index of the operator of the way it is written; -1 has none.
    shift : tuple of int
        Whole cells.
    text : str
        ``-x,y+1/2,-z+1/2 [1 0 0]``.
    n_contacts : int
        Residue contacts, both ways together.
    """

    numeral: str
    operator: int
    shift: tuple[int, int, int]
    text: str
    n_contacts: int


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class NumberedContacts:
    """The crystal's neighbours by numeral.

    Attributes
    ----------
    crystal_contacts : tuple of CrystalContact
        In the order of their numerals.
    of_contact : ndarray of int, shape (n_contacts,)
        For each residue contact the index of its crystal contact, -1 when it is not of
        kind lattice.
    """

    crystal_contacts: tuple[CrystalContact, ...]
    of_contact: NDArray[np.int64]

    def __post_init__(self) -> None:
        store_read_only(self, "of_contact", np.int64, (None,))


def number_crystal_contacts(
    structure: Structure, contacts: Contacts
) -> NumberedContacts:
    """Give the neighbours in the crystal Roman numerals.

    An operator with its shift and the inverse of both share one numeral. Numerals run
    by falling number of residue contacts, then by operator and shift.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Of that structure.

    Returns
    -------
    NumberedContacts
        The neighbours and the neighbour of each residue contact.
    """
    of_contact = np.full(len(contacts.residue_1), -1)
    crystal = structure.crystal
    indices = np.flatnonzero(contacts.kind == LATTICE)
    if crystal is None or not len(indices):
        return NumberedContacts(crystal_contacts=(), of_contact=of_contact)
    keys = np.column_stack([contacts.operator[indices], contacts.shift[indices]])
    distinct, which = np.unique(keys, axis=0, return_inverse=True)
    back = inverse_elements(crystal, distinct)
    both_ways = zip(distinct.tolist(), back.tolist(), strict=True)
    either_way = np.array([min(pair) for pair in both_ways])
    classes, class_of_key = np.unique(either_way, axis=0, return_inverse=True)
    class_of_contact = class_of_key.reshape(-1)[which.reshape(-1)]
    counts = np.bincount(class_of_contact)
    order = sorted(range(len(classes)), key=lambda c: (-counts[c], tuple(classes[c])))
    rank = np.empty(len(classes), dtype=np.int64)
    rank[order] = np.arange(len(classes))
    of_contact[indices] = rank[class_of_contact]
    listed = tuple(
        CrystalContact(
            numeral=roman_numeral(place + 1),
            operator=int(classes[c][0]),
            shift=(int(classes[c][1]), int(classes[c][2]), int(classes[c][3])),
            text=element_text(crystal, classes[c]),
            n_contacts=int(counts[c]),
        )
        for place, c in enumerate(order)
    )
    return NumberedContacts(crystal_contacts=listed, of_contact=of_contact)


def element_text(crystal: Crystal, key: Sequence[int] | NDArray[np.int64]) -> str:
    """Return an operator with its shift as text, ``-x,y+1/2,-z+1/2 [1 0 0]``.

    Parameters
    ----------
    crystal : Crystal
        The cell and its symmetry.
    key : sequence of int
        Operator index and the three shifts.

    Returns
    -------
    str
        Triplet of the International Tables and whole cells.
    """
    return (
        f"{crystal.triplets[int(key[0])]} [{int(key[1])} {int(key[2])} {int(key[3])}]"
    )


def roman_numeral(number: int) -> str:
    """Return a number from 1 as a Roman numeral.

    Parameters
    ----------
    number : int
        From 1 to 3999.

    Returns
    -------
    str
        ``IV`` for 4.

    Raises
    ------
    ValueError
        If the number is out of that range.
    """
    if not 1 <= number <= 3999:
        raise ValueError(f"number is {number}; it must be from 1 to 3999")
    steps = (1000, 900, 500, 400, 100, 90, 50, 40, 10, 9, 5, 4, 1)
    letters = ("M", "CM", "D", "CD", "C", "XC", "L", "XL", "X", "IX", "V", "IV", "I")
    text = ""
    for step, letter in zip(steps, letters, strict=True):
        text += letter * (number // step)
        number %= step
    return text
