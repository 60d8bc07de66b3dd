"""Area that two chains bury between them, in one image at a time."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import CHAIN
from structmap.exposure.sphere import OpenShare, Progress, find_open_share
from structmap.exposure.surroundings import (
    Surroundings,
    chain_shades,
    find_neighbours,
    find_surroundings,
    neighbour_shades,
    touching_distance,
)
from structmap.records import store_read_only
from structmap.structure import POLYMER, Assembly, Structure


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Interfaces:
    """Pairs of chains that face each other in one image, largest area first.

    An interface written with an operator and the same one written with the inverse
    operator are one and stand here once.

    Attributes
    ----------
    copy_1, copy_2 : ndarray of int, shape (n_interfaces,)
        Chain copies of the structure; the second stands in the image.
    operator : ndarray of int, shape (n_interfaces,)
        Index of the crystal's operator; -1 for a mate that only an assembly makes.
    shift : ndarray of int, shape (n_interfaces, 3)
        Whole cells.
    assembly_operator : ndarray of str, shape (n_interfaces,)
        As in `Contacts`.
    kind : ndarray of int, shape (n_interfaces,)
        ``COMPLEX`` or ``LATTICE``.
    area : ndarray of float, shape (n_interfaces,)
        In Å²: the accessible area of both chains alone, less that of the two together.
    n_residue_pairs : ndarray of int, shape (n_interfaces,)
        Residue contacts within 4.5 Å.
    """

    copy_1: NDArray[np.int64]
    copy_2: NDArray[np.int64]
    operator: NDArray[np.int64]
    shift: NDArray[np.int64]
    assembly_operator: NDArray[np.str_]
    kind: NDArray[np.int64]
    area: NDArray[np.float64]
    n_residue_pairs: NDArray[np.int64]

    def __post_init__(self) -> None:
        n = len(self.copy_1)
        for name in ("copy_1", "copy_2", "operator", "kind", "n_residue_pairs"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "shift", np.int64, (n, 3))
        store_read_only(self, "assembly_operator", np.str_, (n,))
        store_read_only(self, "area", np.float64, (n,))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Grouping:
    """Contacts outside the chain by interface.

    `of_contact` is -1 for contacts that belong to none, `flipped` says that a contact
    is written with the inverse of its interface's image, `example` is one contact of
    each interface that is not, and `twofold` says that the image undoes itself and
    brings a chain to itself.
    """

    of_contact: NDArray[np.int64]
    flipped: NDArray[np.bool_]
    example: NDArray[np.int64]
    twofold: NDArray[np.bool_]


def find_interfaces(
    structure: Structure,
    *,
    assemblies: Sequence[Assembly],
    residues: NDArray[np.bool_] | None = None,
    progress: Progress | None = None,
) -> Interfaces:
    """Find the area buried where two chains meet, in the assembly or the lattice.

    Parameters
    ----------
    structure : Structure
        Coordinates as read; of an ensemble the first model is used.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`; see `choose_assemblies`.
    residues : ndarray of bool, shape (n_residues,), optional
        Area and pairs between these residues alone, on both sides, as for the members
        of a unit: what one end takes of the area that the other has in its whole chain.
        All residues by default.
    progress : callable, optional
        Called with the share done, 0 to 1.

    Returns
    -------
    Interfaces
        Those whose spheres overlap, by falling area. Areas are NaN in a file of CA
        atoms alone.

    Notes
    -----
    Areas as in `find_exposure`; both sides together. Janin and Rodier, Proteins 23,
    580-587 (1995), counted 8 to 10 such contacts a molecule in crystals of monomers, of
    200 to 1200 Å² each: one above 1000 Å², or above those of the assembly, may be
    biological.
    """
    around = find_surroundings(structure, assemblies)
    grouping = _group(around, residues)
    contacts, example = around.contacts, grouping.example
    touch = contacts.distance_angstrom <= touching_distance(structure)
    touch &= grouping.of_contact >= 0
    n_pairs = np.bincount(grouping.of_contact[touch], minlength=len(example))
    area = np.full(len(example), np.nan)
    if not structure.ca_only:
        area = _interface_areas(around, grouping, progress)
    order = np.lexsort((np.arange(len(example)), -area))
    order = order[~(area[order] <= 0)]
    chosen = example[order]
    return Interfaces(
        copy_1=structure.copy_of_residue[contacts.residue_1[chosen]],
        copy_2=structure.copy_of_residue[contacts.residue_2[chosen]],
        operator=contacts.operator[chosen],
        shift=contacts.shift[chosen],
        assembly_operator=contacts.assembly_operator[chosen],
        kind=contacts.kind[chosen],
        area=area[order],
        n_residue_pairs=n_pairs[order],
    )


def _group(around: Surroundings, residues: NDArray[np.bool_] | None) -> _Grouping:
    contacts, images = around.contacts, around.images
    polymer = around.structure.kind_of_residue == POLYMER
    kept = contacts.kind != CHAIN
    kept &= polymer[contacts.residue_1] & polymer[contacts.residue_2]
    if residues is not None:
        kept &= residues[contacts.residue_1] & residues[contacts.residue_2]
    index = np.flatnonzero(kept)
    copy = around.structure.copy_of_residue
    copy_1, copy_2 = copy[contacts.residue_1[index]], copy[contacts.residue_2[index]]
    image = images.of_contact[index]
    inverse = images.inverse[image]
    # Of two different chains the first is always the one with the smaller number.
    flips = (copy_1 == copy_2) & (inverse >= 0) & (inverse < image)
    keys = np.column_stack([copy_1, copy_2, np.where(flips, inverse, image)])
    distinct, first, which = np.unique(
        keys, axis=0, return_index=True, return_inverse=True
    )
    which = which.reshape(-1)
    unflipped = np.flatnonzero(~flips)
    example = first.copy()
    example[which[unflipped[::-1]]] = unflipped[::-1]
    of_contact = np.full(len(kept), -1)
    of_contact[index] = which
    flipped = np.zeros(len(kept), dtype=np.bool_)
    flipped[index] = flips
    return _Grouping(
        of_contact=of_contact,
        flipped=flipped,
        example=index[example],
        twofold=(distinct[:, 0] == distinct[:, 1])
        & (images.inverse[distinct[:, 2]] == distinct[:, 2]),
    )


def _interface_areas(
    around: Surroundings, grouping: _Grouping, progress: Progress | None
) -> NDArray[np.float64]:
    found = find_neighbours(around)
    interface = grouping.of_contact[found.contact]
    index = np.flatnonzero(interface >= 0)
    interface = interface[index]
    # Which of the two molecules loses area; both are one where a twofold axis makes it.
    side = found.is_second[index] != grouping.flipped[found.contact[index]]
    side &= ~grouping.twofold[interface]
    atoms = np.zeros(len(around.radius), dtype=np.bool_)
    atoms[found.atom[index]] = True
    share: OpenShare = find_open_share(
        chain_shades(around, atoms),
        neighbour_shades(around, found, index=index, group=2 * interface + side),
        atoms=atoms,
        progress=progress,
    )
    lost = share.lost * 4 * np.pi * around.radius[share.atom] ** 2
    area = np.bincount(share.group // 2, weights=lost, minlength=len(grouping.example))
    return np.asarray(np.where(grouping.twofold, 2 * area, area))
