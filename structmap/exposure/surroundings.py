"""The atoms around each atom, in the molecule and in every image."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from structmap.atom_pairs import (
    Images,
    find_atom_pairs,
    first_model_of,
    images_of,
    keep_atoms,
    one_conformation,
    take_contacts,
)
from structmap.contacts import CHAIN, Contacts, contact_cutoff, find_contacts
from structmap.exposure.sphere import Shades, make_shades, sphere_radii
from structmap.structure import POLYMER, Assembly, Structure

CUTOFF_ANGSTROM = 4.5
CA_CUTOFF_ANGSTROM = 7.5


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Surroundings:
    """What can shade the atoms of one conformation of a structure.

    Attributes
    ----------
    structure : Structure
        One conformation of the polymer of the first model.
    radius : ndarray of float, shape (n_atoms,)
        Of the sphere round each of its atoms, in Å.
    contacts : Contacts
        Residue contacts as far as spheres can overlap, all conformations.
    images : Images
        Of those contacts.
    """

    structure: Structure
    radius: NDArray[np.float64]
    contacts: Contacts
    images: Images


def find_surroundings(
    structure: Structure, assemblies: Sequence[Assembly]
) -> Surroundings:
    """Return what can shade the atoms of a structure.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`.

    Returns
    -------
    Surroundings
        Of the first model.
    """
    structure = first_model_of(structure)
    atoms = one_conformation(structure)
    radius = sphere_radii(structure.element[atoms])
    reach = max(2 * float(radius.max()), touching_distance(structure))
    contacts = find_contacts(structure, reach_angstrom=reach, assemblies=assemblies)
    return Surroundings(
        structure=keep_atoms(structure, atoms),
        radius=radius,
        contacts=contacts,
        images=images_of(structure, contacts),
    )


def touching_distance(structure: Structure) -> float:
    """Return the distance at which residues count as touching.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    float
        4.5 Å between heavy atoms, 7.5 Å in a file of CA atoms alone.
    """
    return contact_cutoff(
        structure,
        cutoff_angstrom=CUTOFF_ANGSTROM,
        ca_cutoff_angstrom=CA_CUTOFF_ANGSTROM,
    )


def chain_shades(around: Surroundings, atoms: NDArray[np.bool_]) -> Shades:
    """Return what each atom's own chain takes of its sphere.

    Parameters
    ----------
    around : Surroundings
        From `find_surroundings`.
    atoms : ndarray of bool, shape (n_atoms,)
        Atoms that are asked for.

    Returns
    -------
    Shades
        All of group 0.
    """
    position = around.structure.position
    tree = cKDTree(position, balanced_tree=False, compact_nodes=False)
    pairs = tree.query_pairs(2 * around.radius.max(), output_type="ndarray").astype(
        np.int64
    )
    copy = around.structure.copy_of_residue[around.structure.residue_of_atom]
    pairs = pairs[copy[pairs[:, 0]] == copy[pairs[:, 1]]]
    both = np.concatenate([pairs, pairs[:, ::-1]])
    both = both[atoms[both[:, 0]]]
    return make_shades(
        both[:, 0],
        position[both[:, 1]] - position[both[:, 0]],
        radius=around.radius[both[:, 0]],
        other_radius=around.radius[both[:, 1]],
        group=np.zeros(len(both), dtype=np.int64),
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Neighbours:
    """Atoms with an atom of another chain or image beside them, from both sides.

    Attributes
    ----------
    contact : ndarray of int, shape (n,)
        Which residue contact it belongs to.
    is_second : ndarray of bool, shape (n,)
        Whether the atom is of residue 2 of the contact, and its neighbour of residue 1.
    atom, other : ndarray of int, shape (n,)
    vector : ndarray of float, shape (n, 3)
        From the atom, as the file has it, to its neighbour, in Å.
    """

    contact: NDArray[np.int64]
    is_second: NDArray[np.bool_]
    atom: NDArray[np.int64]
    other: NDArray[np.int64]
    vector: NDArray[np.float64]


def find_neighbours(around: Surroundings) -> Neighbours:
    """Return the atoms of other chains and images beside each atom.

    Parameters
    ----------
    around : Surroundings
        From `find_surroundings`.

    Returns
    -------
    Neighbours
        As far as spheres can overlap.
    """
    structure, images = around.structure, around.images
    outside = np.flatnonzero(around.contacts.kind != CHAIN)
    some, of_some = take_contacts(around.contacts, images, outside)
    pairs = find_atom_pairs(
        structure,
        some,
        images=of_some,
        reach_angstrom=around.contacts.reach_angstrom,
        atoms=structure.kind_of_residue[structure.residue_of_atom] == POLYMER,
    )
    contact = outside[pairs.contact]
    matrix = images.matrix[images.of_contact[contact]]
    here, there = structure.position[pairs.first], structure.position[pairs.second]
    turn = matrix[:, :3, :3]
    vector = np.einsum("nij,nj->ni", turn, there) + matrix[:, :3, 3] - here
    n = len(contact)
    return Neighbours(
        contact=np.concatenate([contact, contact]),
        is_second=np.repeat([False, True], n),
        atom=np.concatenate([pairs.first, pairs.second]),
        other=np.concatenate([pairs.second, pairs.first]),
        vector=np.concatenate([vector, -np.einsum("nji,nj->ni", turn, vector)]),
    )


def neighbour_shades(
    around: Surroundings,
    found: Neighbours,
    *,
    index: NDArray[np.int64],
    group: NDArray[np.int64],
) -> Shades:
    """Return what atoms of other chains and images take of each sphere.

    Parameters
    ----------
    around : Surroundings
        From `find_surroundings`.
    found : Neighbours
        From `find_neighbours`.
    index : ndarray of int, shape (n,)
        Neighbours that count; one may count in several groups.
    group : ndarray of int, shape (n,)
        What each belongs to.

    Returns
    -------
    Shades
        Sorted by atom and group.
    """
    atom, other = found.atom[index], found.other[index]
    return make_shades(
        atom,
        found.vector[index],
        radius=around.radius[atom],
        other_radius=around.radius[other],
        group=group,
    )
