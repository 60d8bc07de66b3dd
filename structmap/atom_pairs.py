"""Atom pairs behind residue contacts, with the place of the second in its image."""

from collections.abc import Iterator
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import Contacts, contact_matrix
from structmap.records import store_read_only
from structmap.structure import POLYMER, Structure

SAME_ATOM_ANGSTROM = 0.8  # an atom this close to its own image lies on an axis
CONTACTS_AT_ONCE = 20_000
ATOM_COLUMNS = (
    *("position", "residue_of_atom", "model_of_atom", "atom_name", "element"),
    *("altloc", "occupancy", "b_iso"),
)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class AtomPairs:
    """Atom pairs of residue contacts, each pair once.

    Attributes
    ----------
    contact : ndarray of int, shape (n_pairs,)
        Which contact the pair belongs to, rising.
    first, second : ndarray of int, shape (n_pairs,)
        Atoms of residue 1, as the file has them, and of residue 2, in the image.
    distance_angstrom : ndarray of float, shape (n_pairs,)
        Between the two.
    """

    contact: NDArray[np.int64]
    first: NDArray[np.int64]
    second: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = len(self.contact)
        for name in ("contact", "first", "second"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "distance_angstrom", np.float64, (n,))

    def where(self, keep: NDArray[np.bool_]) -> "AtomPairs":
        """Return some of the pairs.

        Parameters
        ----------
        keep : ndarray of bool, shape (n_pairs,)
            Those to return.

        Returns
        -------
        AtomPairs
            The pairs.
        """
        return AtomPairs(
            **{c.name: getattr(self, c.name)[keep] for c in fields(AtomPairs)}
        )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Images:
    """The distinct images that contacts lead to.

    Attributes
    ----------
    matrix : ndarray of float, shape (n_images, 4, 4)
        Cartesian transform of each; the first is the identity.
    of_contact : ndarray of int, shape (n_contacts,)
        Which image the second residue of each contact stands in.
    inverse : ndarray of int, shape (n_images,)
        Which image the inverse transform makes; -1 where no contact leads there.
    """

    matrix: NDArray[np.float64]
    of_contact: NDArray[np.int64]
    inverse: NDArray[np.int64]

    def __post_init__(self) -> None:
        n = len(self.matrix)
        store_read_only(self, "matrix", np.float64, (n, 4, 4))
        store_read_only(self, "of_contact", np.int64, (None,))
        store_read_only(self, "inverse", np.int64, (n,))


def images_of(structure: Structure, contacts: Contacts) -> Images:
    """Return the distinct images that contacts lead to.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    contacts : Contacts
        Of that structure.

    Returns
    -------
    Images
        Their transforms, and which contact leads to which.
    """
    label = np.unique(contacts.assembly_operator, return_inverse=True)[1]
    keys = np.column_stack([contacts.operator, contacts.shift, label.reshape(-1)])
    _, first, which = np.unique(keys, axis=0, return_index=True, return_inverse=True)
    matrices = [contact_matrix(structure, contacts, int(index)) for index in first]
    other = np.array(
        [not np.allclose(m, np.eye(4), atol=1e-9) for m in matrices], dtype=np.bool_
    )
    place = np.where(other, np.cumsum(other), 0)
    matrix = np.array(
        [np.eye(4), *(m for m, o in zip(matrices, other, strict=True) if o)]
    )
    of_contact = place[which.reshape(-1)]
    return Images(
        matrix=matrix, of_contact=of_contact, inverse=_inverses(structure, matrix)
    )


def _inverses(structure: Structure, matrix: NDArray[np.float64]) -> NDArray[np.int64]:
    """Find for each transform the one that undoes it on the file's atoms."""
    ends = np.array([structure.position.min(axis=0), structure.position.max(axis=0)])
    corners = np.stack(np.meshgrid(*ends.T, indexing="ij"), axis=-1).reshape(-1, 3)
    there = _moved(matrix, corners)
    back = _moved(np.linalg.inv(matrix).astype(np.float64), corners)
    out = np.full(len(matrix), -1)
    for index, places in enumerate(back):
        apart = np.linalg.norm(there - places, axis=2).max(axis=1)
        nearest = int(apart.argmin())
        if apart[nearest] < SAME_ATOM_ANGSTROM:
            out[index] = nearest
    return out


def _moved(
    matrix: NDArray[np.float64], point: NDArray[np.float64]
) -> NDArray[np.float64]:
    return np.asarray(
        np.einsum("mij,cj->mci", matrix[:, :3, :3], point) + matrix[:, None, :3, 3],
        dtype=np.float64,
    )


def find_atom_pairs(
    structure: Structure,
    contacts: Contacts,
    *,
    images: Images,
    reach_angstrom: float,
    atoms: NDArray[np.bool_],
) -> AtomPairs:
    """Return the atom pairs of residue contacts within reach.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    contacts : Contacts
        Of that structure.
    images : Images
        Of those contacts.
    reach_angstrom : float
        Largest distance; at most that of the contacts, or pairs are missed.
    atoms : ndarray of bool, shape (n_atoms,)
        Atoms that take part, of one model.

    Returns
    -------
    AtomPairs
        Pairs that may touch: either has no alternate-conformation letter or both have
        the same. An atom on a symmetry element does not pair with itself.
    """
    chosen = np.flatnonzero(atoms)
    n_residues = len(structure.kind_of_residue)
    count = np.bincount(structure.residue_of_atom[chosen], minlength=n_residues)
    start = np.cumsum(count) - count
    letters = np.unique(structure.altloc[chosen], return_inverse=True)[1].reshape(-1)
    letters = letters * (structure.altloc[chosen] != "")
    position = structure.position[chosen]
    found = []
    for block in _blocks(len(contacts.residue_1)):
        of_contact, first, second = _all_pairs(
            contacts.residue_1[block],
            contacts.residue_2[block],
            start=start,
            count=count,
        )
        image = images.of_contact[block][of_contact]
        apart = _apart(position, first, second, matrix=images.matrix, image=image)
        close = apart <= reach_angstrom
        close &= (first != second) | (apart > SAME_ATOM_ANGSTROM)
        one, two = letters[first], letters[second]
        close &= (one == 0) | (two == 0) | (one == two)
        contact = block.start + of_contact[close]
        found.append(
            (contact, chosen[first[close]], chosen[second[close]], apart[close])
        )
    columns = [np.concatenate(column) for column in zip(*found, strict=True)]
    names = (column.name for column in fields(AtomPairs))
    return AtomPairs(**dict(zip(names, columns, strict=True)))


def _blocks(n_contacts: int) -> Iterator[slice]:
    for begin in range(0, max(n_contacts, 1), CONTACTS_AT_ONCE):
        yield slice(begin, min(begin + CONTACTS_AT_ONCE, n_contacts))


def _all_pairs(
    residue_1: NDArray[np.int64],
    residue_2: NDArray[np.int64],
    *,
    start: NDArray[np.int64],
    count: NDArray[np.int64],
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Return every atom of one residue with every atom of the other."""
    n_second = count[residue_2]
    size = count[residue_1] * n_second
    of_contact = np.repeat(np.arange(len(size)), size)
    rank = np.arange(len(of_contact)) - np.repeat(np.cumsum(size) - size, size)
    row, column = np.divmod(rank, n_second[of_contact])
    return (
        of_contact,
        start[residue_1][of_contact] + row,
        start[residue_2][of_contact] + column,
    )


def _apart(
    position: NDArray[np.float64],
    first: NDArray[np.int64],
    second: NDArray[np.int64],
    *,
    matrix: NDArray[np.float64],
    image: NDArray[np.int64],
) -> NDArray[np.float64]:
    vector = position[second]
    for number in np.unique(image[image > 0]):
        there = image == number
        vector[there] = vector[there] @ matrix[number, :3, :3].T + matrix[number, :3, 3]
    vector -= position[first]
    return np.asarray(np.sqrt(np.einsum("ij,ij->i", vector, vector)))


def take_contacts(
    contacts: Contacts, images: Images, index: NDArray[np.int64]
) -> tuple[Contacts, Images]:
    """Return some of the contacts, and their images.

    Parameters
    ----------
    contacts : Contacts
        As found.
    images : Images
        Of those contacts.
    index : ndarray of int, shape (n,)
        Which contacts.

    Returns
    -------
    contacts : Contacts
        Those named.
    images : Images
        With the same numbers as before.
    """
    columns = {
        column.name: getattr(contacts, column.name)[index]
        for column in fields(Contacts)
        if column.name != "reach_angstrom"
    }
    some = replace(contacts, **columns)
    return some, replace(images, of_contact=images.of_contact[index])


def first_model_of(structure: Structure) -> Structure:
    """Return the structure with the atoms of its first model alone.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    Structure
        Itself when it has one model.
    """
    if structure.n_models == 1:
        return structure
    return replace(keep_atoms(structure, structure.model_of_atom == 0), n_models=1)


def keep_atoms(structure: Structure, atoms: NDArray[np.bool_]) -> Structure:
    """Return the structure with some of its atoms; all residues stay.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    atoms : ndarray of bool, shape (n_atoms,)
        Those to keep.

    Returns
    -------
    Structure
        With fewer atoms.
    """
    return replace(
        structure, **{name: getattr(structure, name)[atoms] for name in ATOM_COLUMNS}
    )


def one_conformation(structure: Structure) -> NDArray[np.bool_]:
    """Return which polymer atoms make one conformation of each residue.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    ndarray of bool, shape (n_atoms,)
        Atoms without an alternate-conformation letter and those with the first letter
        of their residue, in the alphabet.
    """
    letters, code = np.unique(structure.altloc, return_inverse=True)
    code = code.reshape(-1)
    lettered = structure.altloc != ""
    smallest = np.full(len(structure.kind_of_residue), len(letters))
    np.minimum.at(smallest, structure.residue_of_atom[lettered], code[lettered])
    polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
    return np.asarray(
        polymer & (~lettered | (code == smallest[structure.residue_of_atom]))
    )
