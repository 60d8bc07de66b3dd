"""How far an assembly goes: a finite complex, or a slice of an endless rod or layer."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import COMPLEX, Contacts
from structmap.quotient.elements import elements_of_contacts, make_elements
from structmap.quotient.placement import Edges, cycle_elements, place_nodes
from structmap.records import store_read_only
from structmap.structure import Structure

ENDLESS = ("rod", "layer", "net")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ExtentPart:
    """Chains that contacts hold together, in one copy.

    Attributes
    ----------
    chain_copies : tuple of int
        Indices of the chain copies.
    closes : str
        ``finite``, ``ring``, ``rod``, ``layer`` or ``net``.
    order : int
        Number of rotation parts; of a ring, the number of images in it.
    rank : int
        Directions in which it goes on without end.
    periods : ndarray of float, shape (n_periods, 3)
        Translations in cell edges after which it comes back.
    """

    chain_copies: tuple[int, ...]
    closes: str
    order: int
    rank: int
    periods: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "periods", np.float64, (None, 3))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class AssemblyExtent:
    """How far the contacts of an assembly go.

    Attributes
    ----------
    closes : str
        That of the part that goes furthest.
    is_endless : bool
        Whether a finite assembly can only be a slice of it.
    parts : tuple of ExtentPart
        In the order of their first chain copy.
    """

    closes: str
    is_endless: bool
    parts: tuple[ExtentPart, ...]


def assembly_extent(
    structure: Structure, contacts: Contacts, *, highest_kind: int = COMPLEX
) -> AssemblyExtent:
    """Tell how far contacts up to a kind go through the crystal.

    Every chain copy is one node, so that no gap in a model parts a chain.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Of that structure, within the cutoff.
    highest_kind : int, default COMPLEX
        ``COMPLEX`` asks for the assembly, ``LATTICE`` for the whole crystal.

    Returns
    -------
    AssemblyExtent
        An endless one means that the file's assembly is a slice of a rod, a layer or a
        net: its complex contacts go on beyond it.
    """
    n_chains = len(structure.chain_copies)
    elements = make_elements(structure, contacts)
    edges = _chain_edges(structure, contacts, highest_kind)
    placement = place_nodes(n_chains, edges, elements=elements)
    around, owner = cycle_elements(edges, placement, elements=elements)
    parts = []
    for part in range(placement.n_parts):
        closure = elements.close(elements.distinct(around[owner == part]))
        chains = tuple(np.flatnonzero(placement.part == part).tolist())
        parts.append(
            ExtentPart(
                chain_copies=chains,
                closes=closure.closes,
                order=closure.order,
                rank=closure.rank,
                periods=closure.periods,
            )
        )
    furthest = max(parts, key=lambda part: (part.rank, part.closes == "ring"))
    return AssemblyExtent(
        closes=furthest.closes,
        is_endless=furthest.closes in ENDLESS,
        parts=tuple(sorted(parts, key=lambda part: part.chain_copies)),
    )


def _chain_edges(structure: Structure, contacts: Contacts, highest_kind: int) -> Edges:
    """Return the contacts as edges between chain copies, equal ones once."""
    first = structure.copy_of_residue[contacts.residue_1]
    second = structure.copy_of_residue[contacts.residue_2]
    names = np.unique(contacts.assembly_operator, return_inverse=True)[1].reshape(-1)
    rows = np.column_stack(
        [first, second, contacts.operator, contacts.shift, names, contacts.kind]
    )
    chosen = np.flatnonzero((contacts.kind <= highest_kind) & (first >= 0))
    chosen = chosen[np.unique(rows[chosen], axis=0, return_index=True)[1]]
    elements = make_elements(structure, contacts)
    return Edges(
        first=first[chosen],
        second=second[chosen],
        element=elements_of_contacts(
            structure, contacts, elements=elements, indices=chosen
        ),
        kind=contacts.kind[chosen],
    )


def extent_sentence(extent: AssemblyExtent) -> str:
    """Return that an assembly is a slice of something endless.

    Parameters
    ----------
    extent : AssemblyExtent
        How far its contacts go.

    Returns
    -------
    str
        Blank when it is finite.
    """
    if not extent.is_endless:
        return ""
    rank = max(part.rank for part in extent.parts)
    part = next(part for part in extent.parts if part.rank == rank)
    where = directions(part.periods.tolist())
    return (
        f"The assembly is a finite slice of an endless {extent.closes}: its contacts "
        f"go on through the crystal {where}.".replace(" .", ".")
    )


def directions(periods: Sequence[Sequence[float]]) -> str:
    """Return the directions of periods in words.

    Parameters
    ----------
    periods : sequence of sequence of float
        Translations in cell edges.

    Returns
    -------
    str
        ``along b``, ``along a and [1 0 2]``; blank without any.
    """
    axes = {"1 0 0": "a", "0 1 0": "b", "0 0 1": "c"}
    names = []
    for period in periods:
        steps = " ".join(f"{x:g}" for x in period).replace("-0 ", "0 ")
        unsigned = steps.replace("-", "")
        names.append(axes.get(unsigned, f"[{steps.replace('-', '−')}]"))
    names.sort(key=lambda name: (name.startswith("["), name))
    if len(names) > 1:
        names = [", ".join(names[:-1]), names[-1]]
    return f"along {' and '.join(names)}" if names else ""
