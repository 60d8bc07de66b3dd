"""Asking of a motional unit what holds it, how weakly, and what that rests on."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.chemistry import CHEMISTRY_KINDS, Chemistry
from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    Contacts,
    SiteGraph,
    contacts_where,
    find_contacts,
    make_site_graph,
    operator_text,
)
from structmap.exposure import find_interfaces
from structmap.holding.disorder import find_deciding_side_chains
from structmap.holding.record import CLOSE_CONTACT, Hold
from structmap.lattice import (
    SMALLEST_PIECE,
    LatticeVerdict,
    NumberedContacts,
    connected_pieces,
    verdict_by_graph,
)
from structmap.quotient import lay_out_unit
from structmap.sites import Sites
from structmap.structure import Assembly, Structure
from structmap.weakest import WeakestLink, find_weakest_link

CUTOFFS_ANGSTROM = (4.0, 5.0, 6.0)
CA_CUTOFFS_ANGSTROM = (7.0, 8.0, 9.0)
MARGIN_ANGSTROM = 1.0
LEVEL_OF_VERDICT = {"internal": CHAIN, "interface": COMPLEX}
# The first of these that holds names a contact in prose: the strongest first.
NAMING_ORDER = (
    *("disulfide", "covalent bond", "metal", "salt bridge", "hydrogen bond"),
    *("cation-pi", "aromatic", "hydrophobic", "water bridge"),
)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Held:
    """What units are held against, made once for all of them.

    Attributes
    ----------
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    contacts : Contacts
        Within the cutoff.
    graph : SiteGraph
        Which sites touch within it.
    chemistry : Chemistry
        Of those contacts.
    numbered : NumberedContacts
        Numerals of those contacts.
    assemblies : tuple of Assembly
        Those whose contacts are complex.
    graph_at : tuple of (float, SiteGraph)
        Which sites touch within other cutoffs.
    lattice_graph : SiteGraph
        Which sites touch by lattice contacts.
    """

    structure: Structure
    sites: Sites
    contacts: Contacts
    graph: SiteGraph
    chemistry: Chemistry
    numbered: NumberedContacts
    assemblies: tuple[Assembly, ...]
    graph_at: tuple[tuple[float, SiteGraph], ...]
    lattice_graph: SiteGraph


def prepare_holding(
    structure: Structure,
    sites: Sites,
    *,
    contacts: Contacts,
    chemistry: Chemistry,
    numbered: NumberedContacts,
    assemblies: Sequence[Assembly],
) -> Held:
    """Return what units are held against.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    contacts : Contacts
        Within the cutoff.
    chemistry : Chemistry
        Of those contacts.
    numbered : NumberedContacts
        Numerals of those contacts.
    assemblies : sequence of Assembly
        Assemblies whose contacts are complex.

    Returns
    -------
    Held
        With the graphs at 4, 5 and 6 Å; between CA atoms at 7, 8 and 9 Å.
    """
    cutoffs = CA_CUTOFFS_ANGSTROM if structure.ca_only else CUTOFFS_ANGSTROM
    wide = find_contacts(structure, reach_angstrom=max(cutoffs), assemblies=assemblies)
    reach = contacts.reach_angstrom
    lattice = contacts_where(contacts, contacts.kind == LATTICE)
    return Held(
        structure=structure,
        sites=sites,
        contacts=contacts,
        graph=make_site_graph(contacts, sites, cutoff_angstrom=reach),
        chemistry=chemistry,
        numbered=numbered,
        assemblies=tuple(assemblies),
        graph_at=tuple(
            (cutoff, make_site_graph(wide, sites, cutoff_angstrom=cutoff))
            for cutoff in cutoffs
        ),
        lattice_graph=make_site_graph(lattice, sites, cutoff_angstrom=reach),
    )


def describe_hold(
    members: NDArray[np.int64], held: Held, *, verdict: LatticeVerdict, name: str = ""
) -> Hold:
    """Tell what holds a unit together, how weakly, and what that depends on.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    held : Held
        What units are held against.
    verdict : LatticeVerdict
        On that unit.
    name : str, optional
        Of the unit.

    Returns
    -------
    Hold
        The weakest link parts what is left without the crystal, where two pieces of
        three or more members are; else what is left of one chain; else any two parts.

    Notes
    -----
    A unit is marginal when the contacts of a closer kind than those it needs would hold
    all its members within 1 Å beyond the cutoff. Poor order: see
    `find_deciding_side_chains`.
    """
    level = LEVEL_OF_VERDICT.get(verdict.verdict, LATTICE)
    layout = lay_out_unit(
        members, held.structure, sites=held.sites, contacts=held.contacts
    )
    closure = layout.levels[level].closure
    link = _weakest(members, held)
    alone = connected_pieces(members, held.lattice_graph, highest_kind=LATTICE)
    return Hold(
        unit=name,
        closes=closure.closes,
        order=closure.order,
        periods=closure.periods,
        weakest=link,
        link_kinds=_kinds(link, held.chemistry) if link else (),
        link_images=_images(link, held) if link else (),
        link_chains=_chains(link, held) if link else (),
        buried_area=_buried_area(members, held),
        largest_without_lattice=len(verdict.pieces_without_lattice[0]),
        largest_by_lattice_alone=len(alone[0]),
        verdict_at=tuple(
            (cutoff, verdict_by_graph(members, graph))
            for cutoff, graph in held.graph_at
        ),
        is_marginal=_is_marginal(level, verdict, held.contacts.reach_angstrom),
        loose_residues=find_deciding_side_chains(
            members, held.structure, sites=held.sites, contacts=held.contacts
        ),
        firm_pieces=_firm_pieces(members, held.graph),
    )


def _firm_pieces(
    members: NDArray[np.int64], graph: SiteGraph
) -> tuple[tuple[int, ...], ...]:
    firm = replace(
        graph,
        site_1=graph.site_1[~graph.weak],
        site_2=graph.site_2[~graph.weak],
        kind=graph.kind[~graph.weak],
        distance_angstrom=graph.distance_angstrom[~graph.weak],
        weak=graph.weak[~graph.weak],
    )
    pieces = connected_pieces(members, firm, highest_kind=LATTICE)
    whole = connected_pieces(members, graph, highest_kind=LATTICE)
    return pieces if len(pieces) > len(whole) else ()


def _weakest(members: NDArray[np.int64], held: Held) -> WeakestLink | None:
    if len(members) < 2:
        return None
    apart: list[tuple[int, ...]] = []
    for level in (COMPLEX, CHAIN):
        pieces = connected_pieces(members, held.graph, highest_kind=level)
        apart = [piece for piece in pieces if len(piece) >= SMALLEST_PIECE]
        if len(apart) > 1:
            break
    return find_weakest_link(
        members,
        held.sites,
        contacts=held.contacts,
        apart=apart if len(apart) > 1 else (),
    )


def _kinds(link: WeakestLink, chemistry: Chemistry) -> tuple[tuple[str, int], ...]:
    """Count the contacts of the link by the first kind that holds for each."""
    counts = dict.fromkeys((*NAMING_ORDER, CLOSE_CONTACT), 0)
    for contact in link.contacts:
        held = {
            CHEMISTRY_KINDS[kind]
            for kind in chemistry.kind[chemistry.contact == contact]
        }
        counts[next((k for k in NAMING_ORDER if k in held), CLOSE_CONTACT)] += 1
    return tuple((kind, count) for kind, count in counts.items() if count)


def _images(link: WeakestLink, held: Held) -> tuple[str, ...]:
    """Return the image that one contact of the link with each neighbour leads to."""
    structure, contacts = held.structure, held.contacts
    numeral = held.numbered.of_contact
    lattice = link.contacts[numeral[link.contacts] >= 0]
    first = np.unique(numeral[lattice], return_index=True)[1]
    texts = (operator_text(structure, contacts, int(i)) for i in lattice[first])
    return tuple(text or "x,y,z [0 0 0]" for text in texts)


def _chains(link: WeakestLink, held: Held) -> tuple[str, ...]:
    contacts = held.contacts
    joined = link.contacts[contacts.kind[link.contacts] == COMPLEX]
    ends = np.concatenate([contacts.residue_1[joined], contacts.residue_2[joined]])
    return tuple(np.unique(held.structure.auth_asym_id[ends]).tolist())


def _buried_area(members: NDArray[np.int64], held: Held) -> float:
    """Return the area that the members bury across lattice contacts."""
    structure, sites, contacts = held.structure, held.sites, held.contacts
    mask = np.zeros(len(structure.kind_of_residue), dtype=np.bool_)
    mask[sites.copy_residue[np.isin(sites.copy_site, members)]] = True
    inside = mask[contacts.residue_1] & mask[contacts.residue_2]
    if structure.ca_only:
        return float("nan")
    if not (inside & (contacts.kind == LATTICE)).any():
        return 0.0
    found = find_interfaces(structure, assemblies=held.assemblies, residues=mask)
    return float(found.area[found.kind == LATTICE].sum())


def _is_marginal(level: int, verdict: LatticeVerdict, cutoff: float) -> bool:
    if level == CHAIN:
        return False
    below = verdict.joining_distance_angstrom[level - 1]
    return bool(below <= cutoff + MARGIN_ANGSTROM)
