"""Area of each residue alone, in its assembly and in the crystal; how it is packed."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from structmap.contacts import COMPLEX, LATTICE, Contacts
from structmap.exposure.sphere import Progress, find_open_share
from structmap.exposure.surroundings import (
    Surroundings,
    chain_shades,
    find_neighbours,
    find_surroundings,
    neighbour_shades,
    touching_distance,
)
from structmap.records import store_read_only
from structmap.structure import POLYMER, Assembly, Structure, one_letter

# Largest accessible area of a residue X in Gly-X-Gly, in Å², over the conformations
# that the Ramachandran plot allows: Tien, Meyer, Sydykova, Spielman and Wilke, PLoS ONE
# 8, e80635 (2013), the theoretical values.
LARGEST_AREA = dict(
    zip(
        "ARNDCQEGHILKMFPSTWYV",
        (
            *(129.0, 274.0, 195.0, 193.0, 167.0, 225.0, 223.0, 104.0, 224.0, 197.0),
            *(201.0, 236.0, 224.0, 240.0, 159.0, 155.0, 172.0, 285.0, 263.0, 174.0),
        ),
        strict=True,
    )
)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Exposure:
    """How open each residue of a structure lies, and how it is packed.

    All arrays run over the residues of the structure. Areas are NaN for ligands,
    waters, residues not asked for, and files of CA atoms alone.

    Attributes
    ----------
    area_alone, area_in_assembly, area_in_crystal : ndarray of float
        Solvent-accessible area in Å² of the residue in its chain alone, with the rest
        of its assembly, and with all images; never rising from one to the next.
    relative_alone, relative_in_assembly, relative_in_crystal : ndarray of float
        The same over the largest area that a residue of that kind can have; NaN for
        nucleic acids and residues without a tabulated parent. An end of a chain or an
        odd conformation can exceed 1.
    contact_number : ndarray of int, shape (n_residues, 3)
        Residues that it touches (heavy atoms within 4.5 Å; CA within 7.5 Å in a file of
        CA atoms) in its chain, in the rest of its assembly and in the lattice. A
        residue of two images counts twice. 0 for ligands and waters.
    mate_distance_angstrom : ndarray of float
        From its heavy atoms to the nearest molecule that only the lattice brings near;
        NaN where there is none. Mates are those that come within the sum of two atom
        spheres (6.4 Å) of any part of its chain.
    """

    area_alone: NDArray[np.float64]
    area_in_assembly: NDArray[np.float64]
    area_in_crystal: NDArray[np.float64]
    relative_alone: NDArray[np.float64]
    relative_in_assembly: NDArray[np.float64]
    relative_in_crystal: NDArray[np.float64]
    contact_number: NDArray[np.int64]
    mate_distance_angstrom: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = len(self.area_alone)
        for place in ("alone", "in_assembly", "in_crystal"):
            store_read_only(self, f"area_{place}", np.float64, (n,))
            store_read_only(self, f"relative_{place}", np.float64, (n,))
        store_read_only(self, "contact_number", np.int64, (n, 3))
        store_read_only(self, "mate_distance_angstrom", np.float64, (n,))

    @property
    def complex_burial(self) -> NDArray[np.float64]:
        """Return the area that the rest of the assembly covers.

        Returns
        -------
        ndarray of float, shape (n_residues,)
            In Å².
        """
        return self.area_alone - self.area_in_assembly

    @property
    def lattice_burial(self) -> NDArray[np.float64]:
        """Return the area that the lattice covers beyond the assembly.

        Returns
        -------
        ndarray of float, shape (n_residues,)
            In Å².
        """
        return self.area_in_assembly - self.area_in_crystal


def find_exposure(
    structure: Structure,
    *,
    assemblies: Sequence[Assembly],
    residues: NDArray[np.bool_] | None = None,
    progress: Progress | None = None,
) -> Exposure:
    """Find the accessible area of each residue at three levels, and its packing.

    Parameters
    ----------
    structure : Structure
        Coordinates as read; of an ensemble the first model is used.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`; see `choose_assemblies`.
    residues : ndarray of bool, shape (n_residues,), optional
        Residues whose areas are wanted; all by default. The others still shade.
    progress : callable, optional
        Called with the share done, 0 to 1.

    Returns
    -------
    Exposure
        Of every residue.

    Notes
    -----
    Shrake and Rupley's method with 960 points an atom and a probe of 1.4 Å: polymer
    atoms of one conformation, without hydrogens. The points of an atom are the same at
    all levels. Against the exact area of a residue of 100 Å² the error is about 0.5 Å².

    References
    ----------
    .. [1] Shrake and Rupley, J. Mol. Biol. 79, 351-371 (1973).
    """
    around = find_surroundings(structure, assemblies)
    areas = np.full((3, len(structure.kind_of_residue)), np.nan)
    if not structure.ca_only:
        areas = _areas(around, residues, progress)
    largest = _largest_areas(structure)
    alone, in_assembly, in_crystal = areas
    return Exposure(
        area_alone=alone,
        area_in_assembly=in_assembly,
        area_in_crystal=in_crystal,
        relative_alone=alone / largest,
        relative_in_assembly=in_assembly / largest,
        relative_in_crystal=in_crystal / largest,
        contact_number=_contact_numbers(structure, around.contacts),
        mate_distance_angstrom=_mate_distances(around),
    )


def _areas(
    around: Surroundings, residues: NDArray[np.bool_] | None, progress: Progress | None
) -> NDArray[np.float64]:
    """Return areas alone, in the assembly and in the crystal, shape (3, n_residues)."""
    structure = around.structure
    n_residues = len(structure.kind_of_residue)
    wanted = np.ones(n_residues, dtype=np.bool_) if residues is None else residues
    atoms = wanted[structure.residue_of_atom]
    found = find_neighbours(around)
    kind = around.contacts.kind[found.contact]
    asked = atoms[found.atom]
    mates = np.flatnonzero(asked & (kind == COMPLEX)), np.flatnonzero(asked)
    further = neighbour_shades(
        around,
        found,
        index=np.concatenate(mates),
        group=np.repeat([COMPLEX, LATTICE], [len(level) for level in mates]),
    )
    share = find_open_share(
        chain_shades(around, atoms), further, atoms=atoms, progress=progress
    )
    left = np.tile(share.share, (3, 1))
    left[share.group, share.atom] -= share.lost
    left *= 4 * np.pi * around.radius**2
    out = np.full((3, n_residues), np.nan)
    has_atoms = np.unique(structure.residue_of_atom[atoms])
    for level, area in zip(out, left, strict=True):
        sums = np.bincount(
            structure.residue_of_atom[atoms], weights=area[atoms], minlength=n_residues
        )
        level[has_atoms] = sums[has_atoms]
    return out


def _largest_areas(structure: Structure) -> NDArray[np.float64]:
    """Return the reference area of each amino acid, NaN for all else."""
    names, which = np.unique(structure.auth_comp_id, return_inverse=True)
    letters = [one_letter(str(name)) for name in names]
    largest = np.array([LARGEST_AREA.get(letter, np.nan) for letter in letters])
    peptide = np.array([c.polymer_type == "peptide" for c in structure.chain_copies])
    of_peptide = (structure.copy_of_residue >= 0) & peptide[structure.copy_of_residue]
    return np.where(of_peptide, largest[which.reshape(-1)], np.nan)


def _contact_numbers(structure: Structure, contacts: Contacts) -> NDArray[np.int64]:
    """Count the residues of the polymer that each residue touches, by kind."""
    near = contacts.distance_angstrom <= touching_distance(structure)
    out = np.zeros((len(structure.kind_of_residue), 3), dtype=np.int64)
    ends = contacts.residue_1, contacts.residue_2
    for end, other in (ends, ends[::-1]):
        touch = near & (structure.kind_of_residue[other] == POLYMER)
        np.add.at(out, (end[touch], contacts.kind[touch]), 1)
    return out


def _mate_distances(around: Surroundings) -> NDArray[np.float64]:
    """Return the distance of each residue to the nearest lattice mate of its chain."""
    structure, contacts, images = around.structure, around.contacts, around.images
    copy = structure.copy_of_residue
    lattice = contacts.kind == LATTICE
    image = images.of_contact[lattice]
    first, second = copy[contacts.residue_1[lattice]], copy[contacts.residue_2[lattice]]
    turns = np.concatenate([images.matrix, np.linalg.inv(images.matrix)])
    there = np.column_stack([first, second, image])
    back = np.column_stack([second, first, image + len(images.matrix)])
    mates = np.unique(np.concatenate([there, back]), axis=0)
    copy_of_atom = copy[structure.residue_of_atom]
    out = np.full(len(copy), np.inf)
    for chain in np.unique(mates[:, 0]):
        own = np.flatnonzero(copy_of_atom == chain)
        clouds = [
            structure.position[copy_of_atom == mate] @ turns[number, :3, :3].T
            + turns[number, :3, 3]
            for _, mate, number in mates[mates[:, 0] == chain]
        ]
        nearest = cKDTree(np.concatenate(clouds)).query(structure.position[own])[0]
        np.minimum.at(out, structure.residue_of_atom[own], nearest)
    out[np.isinf(out)] = np.nan
    return out
