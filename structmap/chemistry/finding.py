"""Telling what contacts are made of, from the distances of heavy atoms."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.atom_pairs import (
    ATOM_COLUMNS,
    AtomPairs,
    Images,
    find_atom_pairs,
    first_model_of,
    images_of,
    take_contacts,
)
from structmap.chemistry import record as kinds
from structmap.chemistry.atom_types import (
    ACCEPTOR,
    ANION,
    APOLAR,
    CATION,
    CATION_CENTRE,
    DONOR,
    RING,
    THIOL,
    atom_types,
    find_ring_centres,
)
from structmap.chemistry.bridges import THROUGH_METAL, Bridges, find_bridges
from structmap.chemistry.record import CHEMISTRY_KINDS, Chemistry
from structmap.contacts import CHAIN, Contacts
from structmap.structure import POLYMER, Assembly, Structure

LONGEST_BOND_ANGSTROM = 2.0
CLASH_ANGSTROM = 2.2
SHORTEST_BOND_ANGSTROM = 0.9
BOND_SLACK_ANGSTROM = 0.2
LONGEST_ATOM_RULE_ANGSTROM = 4.5
LONGEST_RING_RULE_ANGSTROM = 7.0


class _Rule(NamedTuple):
    """Atoms of two types within a span of distances make a kind."""

    kind: int
    types: tuple[int, int]
    nearest: float
    farthest: float


_ATOM_RULES = (
    _Rule(kinds.DISULFIDE, (THIOL, THIOL), 0.0, 2.5),
    _Rule(kinds.SALT_BRIDGE, (CATION, ANION), 0.0, 4.0),
    _Rule(kinds.HYDROGEN_BOND, (DONOR, ACCEPTOR), 0.0, 3.5),
    _Rule(kinds.HYDROPHOBIC, (APOLAR, APOLAR), 0.0, 4.5),
)
_RING_RULES = (
    _Rule(kinds.CATION_PI, (CATION_CENTRE, RING), 0.0, 6.0),
    _Rule(kinds.AROMATIC, (RING, RING), 4.5, 7.0),
)


class _Tags(NamedTuple):
    contact: NDArray[np.int64]
    kind: NDArray[np.int64]
    angstrom: NDArray[np.float64]
    atom_1: NDArray[np.int64]
    atom_2: NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Scene:
    """Contacts with what their rules need: `is_bonded` says the chain bonds the two."""

    structure: Structure
    contacts: Contacts
    images: Images
    is_bonded: NDArray[np.bool_]


def find_chemistry(
    structure: Structure, contacts: Contacts, *, assemblies: Sequence[Assembly]
) -> Chemistry:
    """Tell what the geometry of each contact is compatible with.

    Parameters
    ----------
    structure : Structure
        Coordinates as read; of an ensemble the first model is used.
    contacts : Contacts
        Of that structure; kinds are told for these alone.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`, for the bridges.

    Returns
    -------
    Chemistry
        Every kind that holds, and the bridges by waters and metals.

    Notes
    -----
    Most files hold no hydrogens, so the rules are about heavy atoms, and a kind says
    "geometry compatible with", not that the bond is there. Two alternate conformations
    of different letters never meet.

    - Disulfide: SG to SG of Cys within 2.5 Å (2.05 Å is ideal; from memory).
    - Salt bridge: NE, NH1, NH2 of Arg or NZ of Lys to a carboxylate oxygen of Asp or
      Glu within 4.0 Å [1]_. Histidine is left out: its charge is not in the file.
    - Hydrogen bond: a nitrogen or oxygen that can give to one that can take, within
      3.5 Å [2]_, no angle asked; not between residues that the chain bonds together.
    - Cation-π: NZ of Lys or CZ of Arg within 6.0 Å of the centre of a ring of Phe, Tyr
      or Trp. A stand-in by geometry: the published criterion is an energy [3]_.
    - Aromatic: ring centres of Phe, Tyr, Trp 4.5 to 7.0 Å apart [4]_.
    - Hydrophobic: carbon or sulfur of side chains of Ala, Val, Leu, Ile, Met, Phe, Trp,
      Pro, Tyr, Cys within 4.5 Å (common practice, no source).
    - Covalent bond: atoms of one chain, or the atoms that link residues of a polymer
      in any image, no farther apart than their covalent radii and 0.2 Å; a disulfide is
      not told twice.
    - Clash: atoms below 2.2 Å that no bond joins, directly or through a third atom of
      the chain (common practice, no source). It speaks about the model, not about the
      molecule.
    - Metal and water bridge: see `find_bridges`.

    References
    ----------
    .. [1] Barlow and Thornton, J. Mol. Biol. 168, 867-885 (1983), from memory.
    .. [2] Baker and Hubbard, Prog. Biophys. Mol. Biol. 44, 97-179 (1984), from memory.
    .. [3] Gallivan and Dougherty, Proc. Natl. Acad. Sci. USA 96, 9459-9464 (1999).
    .. [4] Burley and Petsko, Science 229, 23-28 (1985), from memory.
    """
    first = first_model_of(structure)
    scene = _Scene(
        structure=first,
        contacts=contacts,
        images=images_of(first, contacts),
        is_bonded=_bonded_by_chain(structure, contacts),
    )
    bridges = find_bridges(structure, assemblies=assemblies)
    types = atom_types(first)
    tags = _sorted_tags(
        [
            _atom_tags(scene, types),
            _ring_tags(scene, types),
            _close_tags(scene),
            _bridge_tags(contacts, bridges),
        ]
    )
    return Chemistry(
        contact=tags.contact,
        kind=tags.kind,
        distance_angstrom=tags.angstrom,
        atom_1=tags.atom_1,
        atom_2=tags.atom_2,
        bridges=bridges,
        text=np.array(_texts(tags, len(contacts.kind)), dtype=np.str_),
    )


def _bonded_by_chain(structure: Structure, contacts: Contacts) -> NDArray[np.bool_]:
    """Return the contacts whose closest atoms are bonded as in a polymer."""
    link = _link_polymers(structure, contacts.atom_1, contacts.atom_2)
    return np.asarray(link & (contacts.distance_angstrom < LONGEST_BOND_ANGSTROM))


def _link_polymers(
    structure: Structure, atom_1: NDArray[np.int64], atom_2: NDArray[np.int64]
) -> NDArray[np.bool_]:
    one, two = structure.atom_name[atom_1], structure.atom_name[atom_2]
    return np.asarray(
        ((one == "C") & (two == "N"))
        | ((one == "N") & (two == "C"))
        | ((one == "O3'") & (two == "P"))
        | ((one == "P") & (two == "O3'"))
    )


def _atom_tags(scene: _Scene, types: NDArray[np.int64]) -> list[_Tags]:
    structure = scene.structure
    pairs = find_atom_pairs(
        structure,
        scene.contacts,
        images=scene.images,
        reach_angstrom=LONGEST_ATOM_RULE_ANGSTROM,
        atoms=types > 0,
    )
    return [_tags_of_rule(rule, scene, pairs, types) for rule in _ATOM_RULES]


def _tags_of_rule(
    rule: _Rule, scene: _Scene, pairs: AtomPairs, types: NDArray[np.int64]
) -> _Tags:
    one, two = types[pairs.first], types[pairs.second]
    left, right = rule.types
    holds = ((one & left) != 0) & ((two & right) != 0)
    holds |= ((one & right) != 0) & ((two & left) != 0)
    apart = pairs.distance_angstrom
    holds &= (apart >= rule.nearest) & (apart <= rule.farthest)
    if rule.kind == kinds.HYDROGEN_BOND:
        holds &= ~scene.is_bonded[pairs.contact]
    return _shortest(pairs.where(holds), rule.kind)


def _shortest(pairs: AtomPairs, kind: int) -> _Tags:
    """Return the shortest pair of each contact."""
    order = np.lexsort((pairs.distance_angstrom, pairs.contact))
    order = order[np.diff(pairs.contact[order], prepend=-1) != 0]
    return _Tags(
        contact=pairs.contact[order],
        kind=np.full(len(order), kind),
        angstrom=pairs.distance_angstrom[order],
        atom_1=pairs.first[order],
        atom_2=pairs.second[order],
    )


def _ring_tags(scene: _Scene, types: NDArray[np.int64]) -> list[_Tags]:
    """Return the kinds that are about ring centres, searched as points of their own."""
    points, source, point_types = _with_ring_centres(scene.structure, types)
    pairs = find_atom_pairs(
        points,
        scene.contacts,
        images=scene.images,
        reach_angstrom=LONGEST_RING_RULE_ANGSTROM,
        atoms=np.ones(len(source), dtype=np.bool_),
    )
    tags = [_tags_of_rule(rule, scene, pairs, point_types) for rule in _RING_RULES]
    return [t._replace(atom_1=source[t.atom_1], atom_2=source[t.atom_2]) for t in tags]


def _with_ring_centres(
    structure: Structure, types: NDArray[np.int64]
) -> tuple[Structure, NDArray[np.int64], NDArray[np.int64]]:
    """Return a structure of cations and ring centres alone, and whence each comes."""
    cations = np.flatnonzero(types & CATION_CENTRE)
    first, centre, letter = find_ring_centres(structure)
    source = np.concatenate([cations, first])
    order = np.argsort(structure.residue_of_atom[source], kind="stable")
    columns = {name: getattr(structure, name)[source][order] for name in ATOM_COLUMNS}
    columns["position"] = np.concatenate([structure.position[cations], centre])[order]
    columns["altloc"] = np.concatenate([structure.altloc[cations], letter])[order]
    point_types = np.repeat([CATION_CENTRE, RING], [len(cations), len(first)])
    return replace(structure, **columns), source[order], point_types[order]


def _close_tags(scene: _Scene) -> list[_Tags]:
    """Return the bonds and the clashes of atoms that come very close."""
    structure, contacts = scene.structure, scene.contacts
    close = np.flatnonzero(contacts.distance_angstrom < CLASH_ANGSTROM)
    some, images = take_contacts(contacts, scene.images, close)
    pairs = find_atom_pairs(
        structure,
        some,
        images=images,
        reach_angstrom=float(np.nextafter(CLASH_ANGSTROM, 0)),
        atoms=structure.kind_of_residue[structure.residue_of_atom] == POLYMER,
    )
    thiol = structure.atom_name == "SG"
    pairs = pairs.where(~(thiol[pairs.first] & thiol[pairs.second]))
    bonds = some.kind[pairs.contact] == CHAIN
    bonds |= _link_polymers(structure, pairs.first, pairs.second)
    bonds &= _are_bonds(structure, pairs)
    beside = _near_in_chain(structure, pairs) & scene.is_bonded[close][pairs.contact]
    return [
        tags._replace(contact=close[tags.contact])
        for tags in (
            _shortest(pairs.where(bonds), kinds.COVALENT_BOND),
            _shortest(pairs.where(~bonds & ~beside), kinds.CLASH),
        )
    ]


def _are_bonds(structure: Structure, pairs: AtomPairs) -> NDArray[np.bool_]:
    """Return the pairs as far apart as the covalent radii of the two atoms."""
    names, which = np.unique(structure.element, return_inverse=True)
    radii = np.array([gemmi.Element(str(name)).covalent_r for name in names])
    radius = radii[which.reshape(-1)]
    longest = radius[pairs.first] + radius[pairs.second] + BOND_SLACK_ANGSTROM
    apart = pairs.distance_angstrom
    return np.asarray((apart >= SHORTEST_BOND_ANGSTROM) & (apart <= longest))


def _near_in_chain(structure: Structure, pairs: AtomPairs) -> NDArray[np.bool_]:
    """Return the pairs two bonds apart when the chain bonds their residues."""
    leaves = np.isin(structure.atom_name, ("CA", "C", "O", "C3'", "O3'"))
    enters = np.isin(structure.atom_name, ("N", "CA", "P", "OP1", "OP2", "O5'"))
    one, two = pairs.first, pairs.second
    return np.asarray((leaves[one] & enters[two]) | (enters[one] & leaves[two]))


def _bridge_tags(contacts: Contacts, bridges: Bridges) -> list[_Tags]:
    """Return the bridges between residues that also touch."""
    place = {key: index for index, key in enumerate(_keys(contacts))}
    at = np.array([place.get(key, -1) for key in _keys(bridges)], dtype=np.int64)
    held = np.flatnonzero(at >= 0)
    metal = bridges.through[held] == THROUGH_METAL
    longer = np.maximum(bridges.leg_1_angstrom, bridges.leg_2_angstrom)
    return [
        _Tags(
            contact=at[held],
            kind=np.where(metal, kinds.METAL, kinds.WATER_BRIDGE),
            angstrom=longer[held],
            atom_1=bridges.atom_1[held],
            atom_2=bridges.atom_2[held],
        )
    ]


def _keys(pairs: Contacts | Bridges) -> list[tuple[int, ...]]:
    columns = (pairs.residue_1, pairs.residue_2, pairs.operator, pairs.shift)
    return [tuple(row) for row in np.column_stack(columns).tolist()]


def _sorted_tags(groups: Sequence[Sequence[_Tags]]) -> _Tags:
    parts = [tags for group in groups for tags in group]
    names = _Tags._fields
    joined = {n: np.concatenate([getattr(t, n) for t in parts]) for n in names}
    order = np.lexsort((joined["kind"], joined["contact"]))
    return _Tags(**{name: column[order] for name, column in joined.items()})


def _texts(tags: _Tags, n_contacts: int) -> list[str]:
    phrases: list[list[str]] = [[] for _ in range(n_contacts)]
    for contact, kind, angstrom in zip(
        tags.contact.tolist(), tags.kind.tolist(), tags.angstrom.tolist(), strict=True
    ):
        phrases[contact].append(f"{CHEMISTRY_KINDS[kind]} {angstrom:.1f}")
    return ["; ".join(some) for some in phrases]
