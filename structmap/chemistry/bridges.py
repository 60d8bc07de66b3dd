"""Residues that a water or a metal ion holds together, over the whole crystal."""

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from typing import NamedTuple

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.atom_pairs import find_atom_pairs, first_model_of, images_of, keep_atoms
from structmap.contacts import GroupTable, find_contacts, make_group_table
from structmap.contacts.assemblies import assembly_frames
from structmap.contacts.kinds import kinds_of_contacts
from structmap.records import store_read_only
from structmap.structure import POLYMER, WATER, Assembly, Structure

WATER_LEG_ANGSTROM = 3.5
METAL_LEG_ANGSTROM = 3.0
THROUGH_WATER, THROUGH_METAL = 0, 1


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Bridges:
    """Pairs of residues that touch the same water or metal, each pair once a bridge.

    Sorted by (through, residue_1, residue_2, operator, shift); written like `Contacts`.

    Attributes
    ----------
    through : ndarray of int, shape (n_bridges,)
        ``THROUGH_WATER`` or ``THROUGH_METAL``.
    residue_1, residue_2 : ndarray of int, shape (n_bridges,)
        Polymer residues; the second stands in the image.
    operator : ndarray of int, shape (n_bridges,)
    shift : ndarray of int, shape (n_bridges, 3)
    kind : ndarray of int, shape (n_bridges,)
        ``CHAIN``, ``COMPLEX`` or ``LATTICE``.
    centre : ndarray of int, shape (n_bridges,)
        Atom of the water or metal; where several join one pair, that with the shortest
        longer leg.
    atom_1, atom_2 : ndarray of int, shape (n_bridges,)
        Atoms at the ends.
    leg_1_angstrom, leg_2_angstrom : ndarray of float, shape (n_bridges,)
        From each end to the centre.
    """

    through: NDArray[np.int64]
    residue_1: NDArray[np.int64]
    residue_2: NDArray[np.int64]
    operator: NDArray[np.int64]
    shift: NDArray[np.int64]
    kind: NDArray[np.int64]
    centre: NDArray[np.int64]
    atom_1: NDArray[np.int64]
    atom_2: NDArray[np.int64]
    leg_1_angstrom: NDArray[np.float64]
    leg_2_angstrom: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = len(self.through)
        for name in ("through", "residue_1", "residue_2", "operator", "kind"):
            store_read_only(self, name, np.int64, (n,))
        for name in ("centre", "atom_1", "atom_2"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "shift", np.int64, (n, 3))
        store_read_only(self, "leg_1_angstrom", np.float64, (n,))
        store_read_only(self, "leg_2_angstrom", np.float64, (n,))


class _Legs(NamedTuple):
    """Polymer atoms beside a centre, which stands in the image (operator, shift)."""

    through: NDArray[np.int64]
    centre: NDArray[np.int64]
    atom: NDArray[np.int64]
    operator: NDArray[np.int64]
    shift: NDArray[np.int64]
    angstrom: NDArray[np.float64]

    def at(self, index: NDArray[np.int64]) -> "_Legs":
        return _Legs(**{n: getattr(self, n)[index] for n in _Legs._fields})


def find_bridges(structure: Structure, *, assemblies: Sequence[Assembly]) -> Bridges:
    """Find the residues that a water or a metal ion holds together.

    Parameters
    ----------
    structure : Structure
        Coordinates as read; of an ensemble the first model is used.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`; see `choose_assemblies`.

    Returns
    -------
    Bridges
        A residue may be bridged to its own image.

    Notes
    -----
    A water bridges two residues when its oxygen lies within 3.5 Å of a nitrogen or
    oxygen of both, the distance of a hydrogen bond (Baker and Hubbard, Prog. Biophys.
    Mol. Biol. 44, 97-179, 1984, from memory); a metal when it lies within 3.0 Å of a
    nitrogen, oxygen or sulfur of both (common practice, no source). Both are found in
    any image, and the pair is labelled by what leads from one residue through the
    bridge to the other, wherever the file lists the water. A water on a symmetry
    element bridges residues to their images. Mates that only an assembly makes are not
    searched.
    """
    structure = first_model_of(structure)
    legs = _join(
        [
            _find_legs(
                structure,
                centres=_waters(structure),
                ends=_ends(structure, ("N", "O")),
                reach_angstrom=WATER_LEG_ANGSTROM,
                through=THROUGH_WATER,
            ),
            _find_legs(
                structure,
                centres=_metals(structure),
                ends=_ends(structure, ("N", "O", "S")),
                reach_angstrom=METAL_LEG_ANGSTROM,
                through=THROUGH_METAL,
            ),
        ]
    )
    table = None if structure.crystal is None else make_group_table(structure.crystal)
    return _classified(_paired(structure, legs, table), structure, assemblies, table)


def _waters(structure: Structure) -> NDArray[np.bool_]:
    water = structure.kind_of_residue[structure.residue_of_atom] == WATER
    return np.asarray(water & (structure.element == "O"))


def _metals(structure: Structure) -> NDArray[np.bool_]:
    names, which = np.unique(structure.element, return_inverse=True)
    metal = np.array(
        [gemmi.Element(str(name)).is_metal for name in names], dtype=np.bool_
    )
    outside = structure.kind_of_residue[structure.residue_of_atom] != POLYMER
    return np.asarray(metal[which.reshape(-1)] & outside)


def _ends(structure: Structure, elements: tuple[str, ...]) -> NDArray[np.bool_]:
    polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
    return np.asarray(polymer & np.isin(structure.element, elements))


def _find_legs(
    structure: Structure,
    *,
    centres: NDArray[np.bool_],
    ends: NDArray[np.bool_],
    reach_angstrom: float,
    through: int,
) -> _Legs:
    """Search polymer atoms and centres as one molecule, and keep what joins the two."""
    atoms = centres | ends if centres.any() else centres
    kept = np.flatnonzero(atoms)
    if not len(kept):
        none = np.zeros(0, dtype=np.int64)
        return _Legs(
            through=none,
            centre=none,
            atom=none,
            operator=none,
            shift=none.reshape(0, 3),
            angstrom=np.zeros(0),
        )
    small = _with_centres_as_polymer(keep_atoms(structure, atoms), structure, centres)
    found = find_contacts(small, reach_angstrom=reach_angstrom, assemblies=())
    pairs = find_atom_pairs(
        small,
        found,
        images=images_of(small, found),
        reach_angstrom=reach_angstrom,
        atoms=np.ones(len(kept), dtype=np.bool_),
    )
    pairs = pairs.where(ends[kept[pairs.first]] & centres[kept[pairs.second]])
    return _Legs(
        through=np.full(len(pairs.contact), through),
        centre=kept[pairs.second],
        atom=kept[pairs.first],
        operator=found.operator[pairs.contact],
        shift=found.shift[pairs.contact],
        angstrom=pairs.distance_angstrom,
    )


def _with_centres_as_polymer(
    small: Structure, structure: Structure, centres: NDArray[np.bool_]
) -> Structure:
    """Return the structure with the residues of the centres made to be searched."""
    residues = np.unique(structure.residue_of_atom[centres])
    kind, copy = small.kind_of_residue.copy(), small.copy_of_residue.copy()
    kind[residues], copy[residues] = POLYMER, 0
    return replace(small, kind_of_residue=kind, copy_of_residue=copy)


def _join(parts: Sequence[_Legs]) -> _Legs:
    names = _Legs._fields
    return _Legs(**{n: np.concatenate([getattr(p, n) for p in parts]) for n in names})


def _paired(structure: Structure, legs: _Legs, table: GroupTable | None) -> Bridges:
    """Return every two legs of one centre as a pair of residues, the shortest kept."""
    legs = _shortest_legs(structure, legs)
    first, second = _two_of_each_centre(legs.centre)
    one, two = legs.at(first), legs.at(second)
    residue_1 = structure.residue_of_atom[one.atom]
    residue_2 = structure.residue_of_atom[two.atom]
    there = _between(one, two, table)
    back = _between(two, one, table)
    flips = (residue_1 > residue_2) | ((residue_1 == residue_2) & _before(back, there))
    element = np.where(flips[:, None], back, there)
    pairs = Bridges(
        through=one.through,
        residue_1=np.where(flips, residue_2, residue_1),
        residue_2=np.where(flips, residue_1, residue_2),
        operator=element[:, 0],
        shift=element[:, 1:],
        kind=np.zeros(len(flips), dtype=np.int64),
        centre=one.centre,
        atom_1=np.where(flips, two.atom, one.atom),
        atom_2=np.where(flips, one.atom, two.atom),
        leg_1_angstrom=np.where(flips, two.angstrom, one.angstrom),
        leg_2_angstrom=np.where(flips, one.angstrom, two.angstrom),
    )
    return _each_once(pairs)


def _shortest_legs(structure: Structure, legs: _Legs) -> _Legs:
    """Keep one leg from each centre to each residue in each image, the shortest."""
    residue = structure.residue_of_atom[legs.atom]
    keys = np.column_stack(
        [legs.through, legs.centre, residue, legs.operator, legs.shift]
    )
    order = np.lexsort((legs.angstrom, *keys.T[::-1]))
    new = np.ones(len(order), dtype=np.bool_)
    new[1:] = (keys[order][1:] != keys[order][:-1]).any(axis=1)
    return legs.at(order[new])


def _two_of_each_centre(
    centre: NDArray[np.int64],
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return all pairs of places that hold the same number, which stand together."""
    firsts, seconds = [np.zeros(0, dtype=np.int64)], [np.zeros(0, dtype=np.int64)]
    step = 1
    while step < len(centre):
        same = np.flatnonzero(centre[step:] == centre[:-step])
        if not len(same):
            break
        firsts.append(same)
        seconds.append(same + step)
        step += 1
    return np.concatenate(firsts), np.concatenate(seconds)


def _between(one: _Legs, two: _Legs, table: GroupTable | None) -> NDArray[np.int64]:
    """Return what leads from the first end to the second, g_1 · inverse of g_2."""
    if table is None:
        return np.zeros((len(one.centre), 4), dtype=np.int64)
    inverse = table.inverse(two.operator, two.shift)
    return np.column_stack(table.product((one.operator, one.shift), inverse))


def _before(left: NDArray[np.int64], right: NDArray[np.int64]) -> NDArray[np.bool_]:
    place = np.argmax(left != right, axis=1)
    row = np.arange(len(left))
    return np.asarray(left[row, place] < right[row, place])


def _take(pairs: Bridges, index: NDArray[np.int64] | NDArray[np.bool_]) -> Bridges:
    return Bridges(**{c.name: getattr(pairs, c.name)[index] for c in fields(Bridges)})


def _each_once(pairs: Bridges) -> Bridges:
    """Drop residues bridged to themselves and all but the shortest bridge of a pair."""
    same = pairs.residue_1 == pairs.residue_2
    pairs = _take(pairs, ~(same & (pairs.operator == 0) & ~pairs.shift.any(axis=1)))
    longer = np.maximum(pairs.leg_1_angstrom, pairs.leg_2_angstrom)
    keys = np.column_stack(
        [pairs.through, pairs.residue_1, pairs.residue_2, pairs.operator, pairs.shift]
    )
    order = np.lexsort((longer, *keys.T[::-1]))
    new = np.ones(len(order), dtype=np.bool_)
    new[1:] = (keys[order][1:] != keys[order][:-1]).any(axis=1)
    return _take(pairs, order[new])


def _classified(
    pairs: Bridges,
    structure: Structure,
    assemblies: Sequence[Assembly],
    table: GroupTable | None,
) -> Bridges:
    if not len(pairs.through):
        return pairs
    elements = np.column_stack([pairs.operator, pairs.shift])
    distinct, place = np.unique(elements, axis=0, return_inverse=True)
    kind = kinds_of_contacts(
        structure.copy_of_residue[pairs.residue_1],
        structure.copy_of_residue[pairs.residue_2],
        place=place.reshape(-1),
        elements=distinct,
        frames=assembly_frames(structure, assemblies),
        table=table,
    )
    return replace(pairs, kind=kind)
