"""Cutoffs, parts of a contact list, and what an image is called and made by."""

from dataclasses import fields, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.contacts.group import element_matrix
from structmap.contacts.record import Contacts
from structmap.structure import Structure, residue_label

OVERLAP_ANGSTROM = 1.0


def contact_cutoff(
    structure: Structure, *, cutoff_angstrom: float, ca_cutoff_angstrom: float
) -> float:
    """Return the distance at which residues of a structure touch.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    cutoff_angstrom : float
        Between any heavy atoms.
    ca_cutoff_angstrom : float
        Between CA atoms, for a file that holds nothing else.

    Returns
    -------
    float
        In Å.
    """
    return ca_cutoff_angstrom if structure.ca_only else cutoff_angstrom


def contacts_within(contacts: Contacts, cutoff_angstrom: float) -> Contacts:
    """Return the contacts up to a shorter distance.

    Parameters
    ----------
    contacts : Contacts
        Contacts as found.
    cutoff_angstrom : float
        At most the reach that the contacts were searched to.

    Returns
    -------
    Contacts
        The same as a search to that distance, but for ``n_atom_pairs`` and
        ``share_of_models``, which stay those of the wider search.

    Raises
    ------
    ValueError
        If contacts that long were not searched.
    """
    if not cutoff_angstrom <= contacts.reach_angstrom:
        raise ValueError(
            f"cutoff_angstrom is {cutoff_angstrom}; contacts were searched only up to "
            f"{contacts.reach_angstrom}"
        )
    near = contacts_where(contacts, contacts.distance_angstrom <= cutoff_angstrom)
    return replace(near, reach_angstrom=cutoff_angstrom)


def contacts_where(contacts: Contacts, keep: NDArray[np.bool_]) -> Contacts:
    """Return some of the contacts.

    Parameters
    ----------
    contacts : Contacts
        Contacts as found.
    keep : ndarray of bool, shape (n_contacts,)
        Those to return.

    Returns
    -------
    Contacts
        In the same order.
    """
    columns = {
        column.name: getattr(contacts, column.name)[keep]
        for column in fields(Contacts)
        if column.name != "reach_angstrom"
    }
    return replace(contacts, **columns)


def overlap_warning(structure: Structure, contacts: Contacts) -> str:
    """Return that molecules overlap with their images, if they do.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    contacts : Contacts
        Contacts as found.

    Returns
    -------
    str
        One sentence; blank when no atoms of residues in different images come within
        1 Å, where no two atoms can be.
    """
    elsewhere = (contacts.operator != 0) | contacts.shift.any(axis=1)
    over = np.flatnonzero(elsewhere & (contacts.distance_angstrom < OVERLAP_ANGSTROM))
    if not len(over):
        return ""
    image = operator_text(structure, contacts, int(over[0]))
    label = residue_label(structure, int(contacts.residue_1[over[0]]))
    noun = "pair of residues comes" if len(over) == 1 else "pairs of residues come"
    return (
        f"Molecules overlap with their images: {len(over)} {noun} within 1\u00a0Å "
        f"({label} of {image} first); cell, space group or coordinates do not belong "
        "together, and contacts across the crystal mean nothing there."
    )


def operator_text(structure: Structure, contacts: Contacts, index: int) -> str:
    """Return the image of the second residue of a contact in words.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    contacts : Contacts
        Contacts as found.
    index : int
        Which contact.

    Returns
    -------
    str
        ``-x,y+1/2,-z+1/2 [1 0 0]``: the operator as the International Tables write it
        and the whole cells added to it; ``assembly 1:5`` for operator 5 of assembly 1
        where the crystal does not make it; blank in the molecule itself.
    """
    operator, shift = int(contacts.operator[index]), contacts.shift[index]
    if operator < 0:
        return f"assembly {contacts.assembly_operator[index]}"
    if structure.crystal is None or (operator == 0 and not shift.any()):
        return ""
    cells = " ".join(str(number) for number in shift.tolist())
    return f"{structure.crystal.triplets[operator]} [{cells}]"


def image_matrix(
    structure: Structure, operator: int, shift: ArrayLike
) -> NDArray[np.float64]:
    """Return the Cartesian transform that makes an image of the crystal.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    operator : int
        Index of the crystal's operator.
    shift : array_like of int, shape (3,)
        Whole cells.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Made with the matrices and vectors of the file, so that frames other than the
        standard one are right too.

    Raises
    ------
    ValueError
        If there is no crystal, or no such operator.
    """
    cells = np.asarray(shift, dtype=np.int64)
    crystal = structure.crystal
    if crystal is None:
        if operator == 0 and not cells.any():
            return np.eye(4)
        raise ValueError("the structure has no crystal; only operator 0 exists")
    if not 0 <= operator < len(crystal.triplets):
        raise ValueError(
            f"operator is {operator}; it must be 0 to {len(crystal.triplets) - 1}"
        )
    return element_matrix(crystal, operator, cells)


def mate_matrix(structure: Structure, assembly_operator: str) -> NDArray[np.float64]:
    """Return the Cartesian transform of a mate that only an assembly makes.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    assembly_operator : str
        As contacts name it: ``1:5``, or ``1:5/2`` for operator 5 seen from the
        molecule that operator 2 makes.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Cartesian transform with the translation in the last column.

    Raises
    ------
    ValueError
        If there is no such operator.
    """
    name, _, numbers = assembly_operator.rpartition(":")
    matrices = [item.matrices for item in structure.assemblies if item.name == name]
    try:
        chosen = [matrices[0][int(number) - 1] for number in numbers.split("/")]
    except (IndexError, ValueError) as error:
        raise ValueError(
            f"there is no assembly operator {assembly_operator!r}"
        ) from error
    if len(chosen) == 1:
        return np.array(chosen[0])
    return np.asarray(np.linalg.inv(chosen[1]) @ chosen[0])


def contact_matrix(
    structure: Structure, contacts: Contacts, index: int
) -> NDArray[np.float64]:
    """Return the Cartesian transform that places the second residue of a contact.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    contacts : Contacts
        Contacts as found.
    index : int
        Which contact.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Cartesian transform with the translation in the last column.
    """
    label = str(contacts.assembly_operator[index])
    if label:
        return mate_matrix(structure, label)
    return image_matrix(structure, int(contacts.operator[index]), contacts.shift[index])
