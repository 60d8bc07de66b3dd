"""What the 3D picture is drawn from: atoms, neighbours, contacts, as plain data."""

import json
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import py3Dmol
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from structmap.contacts import (
    COMPLEX,
    LATTICE,
    Contacts,
    image_matrix,
    inverse_elements,
    mate_matrix,
)
from structmap.page.listing import Listing
from structmap.result import AnalysisRecord
from structmap.structure import LIGAND_PART, POLYMER, Structure

WHOLE_UP_TO_ATOMS = 5000
NEIGHBOUR_REACH_ANGSTROM = 20.0
SAME_PLACE_ANGSTROM = 0.01
BACKBONE = ("N", "CA", "C", "O", "P", "OP1", "OP2", "O5'", "O3'")
ANCHORS = ("CA", "P", "C4'")
ALLOWED_CALLS = ("addModel", "setProjection")
_CHAIN_LETTERS = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789"

ImageKey = tuple[int, int, int, int, str]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class DrawnAtoms:
    """The atoms that the page carries, sorted by residue.

    Attributes
    ----------
    atom : ndarray of int, shape (n_kept,)
        Indices of atoms of the structure.
    anchor : ndarray of int, shape (n_drawn,)
        For each polymer residue the place in `atom` where its bead stands, -1 for none.
    """

    atom: NDArray[np.int64]
    anchor: NDArray[np.int64]


def choose_atoms(record: AnalysisRecord, listing: Listing) -> DrawnAtoms:
    """Return which atoms the page carries.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    DrawnAtoms
        All heavy atoms of the polymer in small structures; in large ones the backbone,
        and the side chains of unit members and of what touches them across the crystal.
    """
    structure, n_drawn = record.structure, len(listing.first)
    kind = structure.kind_of_residue[structure.residue_of_atom]
    wanted = np.isin(kind, (POLYMER, LIGAND_PART)) & (
        structure.model_of_atom == _model(structure)
    )
    wanted &= first_conformation(structure)
    if wanted.sum() > WHOLE_UP_TO_ATOMS:
        whole = np.isin(structure.residue_of_atom, _close_up_residues(record))
        whole |= np.isin(
            structure.atom_name, sorted({str(a) for a in record.sites.atom} - {""})
        )
        wanted &= np.isin(structure.atom_name, BACKBONE) | whole | (kind != POLYMER)
    atom = np.flatnonzero(wanted)
    return DrawnAtoms(atom=atom, anchor=_anchors(structure, atom, n_drawn))


def _model(structure: Structure) -> int:
    return int(structure.model_of_atom.min(initial=0))


def first_conformation(structure: Structure) -> NDArray[np.bool_]:
    """Return of each atom name in a residue the first alternate conformation.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    ndarray of bool, shape (n_atoms,)
        True for the atom that is drawn.
    """
    keys = np.char.add(
        structure.residue_of_atom.astype(str), structure.atom_name.astype(str)
    )
    keys = np.char.add(keys, np.char.add("/", structure.model_of_atom.astype(str)))
    keep = np.zeros(len(keys), dtype=bool)
    keep[np.unique(keys, return_index=True)[1]] = True
    return keep


def _close_up_residues(record: AnalysisRecord) -> NDArray[np.int64]:
    members = [unit.members for unit in record.units]
    sites = np.concatenate(members) if members else np.empty(0, dtype=np.int64)
    contacts = record.contacts
    own = record.sites.copy_residue[np.isin(record.sites.copy_site, sites)]
    across = contacts.kind == LATTICE
    partners = np.concatenate(
        [
            contacts.residue_2[across & np.isin(contacts.residue_1, own)],
            contacts.residue_1[across & np.isin(contacts.residue_2, own)],
        ]
    )
    return np.unique(np.concatenate([own, partners]))


def _anchors(
    structure: Structure, atom: NDArray[np.int64], n_drawn: int
) -> NDArray[np.int64]:
    residue, name = structure.residue_of_atom[atom], structure.atom_name[atom]
    anchor = np.full(n_drawn, -1)
    places = np.arange(len(atom))[::-1]
    anchor[residue[places]] = places
    for wanted in reversed(ANCHORS):
        found = np.flatnonzero(name == wanted)
        anchor[residue[found]] = found
    return anchor


def recorded_calls(structure: Structure, atoms: DrawnAtoms) -> list[list[Any]]:
    """Return the calls that build the picture, as data.

    The calls are those that the Python wrapper of the 3D library records. The page
    replays them against a list of allowed names; its own text never reaches a parser
    of scripts. Chains and residues carry made-up names, so that no text of the
    coordinate file is among them.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    atoms : DrawnAtoms
        Atoms that the page carries.

    Returns
    -------
    list of list
        Name of the call and its arguments.
    """
    view = py3Dmol.view()
    view.updatejs = ""
    view.addModel(_as_pdb(structure, atoms), "pdb")
    view.setProjection("orthographic")
    return [_parse_call(line) for line in view.updatejs.splitlines() if line.strip()]


def _parse_call(line: str) -> list[Any]:
    name, arguments = line.strip().removesuffix(");").split("(", 1)
    name = name.split(".")[-1]
    if name not in ALLOWED_CALLS:
        raise ValueError(f"{name} is not among the calls that the page replays")
    return [name, *json.loads(f"[{arguments}]")]


def _as_pdb(structure: Structure, atoms: DrawnAtoms) -> str:
    residues = structure.residue_of_atom[atoms.atom]
    chains = structure.copy_of_residue[residues]
    lines = []
    for serial, (atom, residue, chain) in enumerate(
        zip(atoms.atom.tolist(), residues.tolist(), chains.tolist(), strict=True),
        start=1,
    ):
        name = "".join(
            c for c in str(structure.atom_name[atom]) if c.isalnum() or c in "'*"
        )
        element = "".join(c for c in str(structure.element[atom]) if c.isalpha())[:2]
        of_ligand = structure.kind_of_residue[residue] == LIGAND_PART
        record = "HETATM" if of_ligand else "ATOM  "
        x, y, z = structure.position[atom]
        lines.append(
            f"{record}{serial % 100000:5d} {name[:4]:>4s} RES "
            f"{_letter(chain)}{residue % 10000:4d}    {x:8.3f}{y:8.3f}{z:8.3f}"
            f"{'':22s}{element:>2s}"
        )
    return "\n".join(lines)


def _letter(chain: int) -> str:
    return _CHAIN_LETTERS[chain % len(_CHAIN_LETTERS)]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Images:
    """The neighbours that touch the molecule.

    Attributes
    ----------
    keys : tuple
        Operator, shift and assembly operator of each.
    matrices : ndarray, shape (n_images, 4, 4)
        Cartesian transforms.
    inverse : tuple of int
        Index of the inverse image, -1 when it is not drawn.
    of_contact, back_of_contact : ndarray of int, shape (n_contacts,)
        The image of each contact's second partner, and the one in which the first
        partner stands when the second is in this molecule; -1 for none.
    """

    keys: tuple[ImageKey, ...]
    matrices: NDArray[np.float64]
    inverse: tuple[int, ...]
    of_contact: NDArray[np.int64]
    back_of_contact: NDArray[np.int64]


def find_images(structure: Structure, contacts: Contacts) -> Images:
    """Return the images of the molecule that touch it, and their inverses.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    contacts : Contacts
        Of that structure.

    Returns
    -------
    Images
        Sorted by operator and shift.
    """
    keys = _contact_keys(contacts)
    elsewhere = {key for key in keys if key != (0, 0, 0, 0, "")}
    both = sorted(elsewhere | _inverses(structure, elsewhere))
    place = {key: index for index, key in enumerate(both)}
    matrices = np.array([_matrix(structure, key) for key in both]).reshape(-1, 4, 4)
    inverse = _inverse_places(matrices)
    of_contact = np.array([place.get(key, -1) for key in keys], dtype=np.int64)
    back = np.array([inverse[i] if i >= 0 else -1 for i in of_contact], dtype=np.int64)
    return Images(
        keys=tuple(both),
        matrices=matrices,
        inverse=inverse,
        of_contact=of_contact,
        back_of_contact=back,
    )


def _contact_keys(contacts: Contacts) -> list[ImageKey]:
    operators, shifts = contacts.operator.tolist(), contacts.shift.tolist()
    assembly = contacts.assembly_operator.tolist()
    return [
        (operator, *shift, name)
        for operator, shift, name in zip(operators, shifts, assembly, strict=True)
    ]


def _inverses(structure: Structure, keys: set[ImageKey]) -> set[ImageKey]:
    """Return the inverses of the images that the crystal makes."""
    rows = np.array([key[:4] for key in keys if key[0] >= 0], dtype=np.int64)
    if structure.crystal is None or not len(rows):
        return set()
    inverse = inverse_elements(structure.crystal, rows).tolist()
    return {(k, a, b, c, "") for k, a, b, c in inverse}


def _inverse_places(matrices: NDArray[np.float64]) -> tuple[int, ...]:
    """Return for each image the place of its inverse, -1 when it is not among them."""
    found = []
    for matrix in matrices:
        gap = np.abs(matrices @ matrix - np.eye(4)).max(axis=(1, 2), initial=0.0)
        best = int(np.argmin(gap))
        found.append(best if gap[best] < SAME_PLACE_ANGSTROM else -1)
    return tuple(found)


def _matrix(structure: Structure, key: ImageKey) -> NDArray[np.float64]:
    if key[0] >= 0:
        return image_matrix(structure, key[0], np.array(key[1:4]))
    return mate_matrix(structure, key[4])


def image_residues(
    record: AnalysisRecord, images: Images, atoms: DrawnAtoms
) -> list[list[tuple[int, int]]]:
    """Return which residues of each image are drawn, as half-open ranges.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    images : Images
        Neighbours that touch the molecule.
    atoms : DrawnAtoms
        Atoms that the page carries.

    Returns
    -------
    list of list of (int, int)
        Whole chains that touch; in large structures only what comes within 20 Å of
        this molecule.
    """
    structure, contacts = record.structure, record.contacts
    n_drawn = len(atoms.anchor)
    large = np.count_nonzero(
        structure.kind_of_residue[structure.residue_of_atom] == POLYMER
    )
    tree = None
    if large > WHOLE_UP_TO_ATOMS:
        tree = cKDTree(anchor_positions(structure, atoms))
    drawn = []
    for index, matrix in enumerate(images.matrices):
        touching = np.concatenate(
            [
                contacts.residue_2[images.of_contact == index],
                contacts.residue_1[images.back_of_contact == index],
            ]
        )
        chains = np.unique(structure.copy_of_residue[touching])
        keep = np.isin(structure.copy_of_residue[:n_drawn], chains)
        if tree is not None:
            moved = (
                anchor_positions(structure, atoms) @ matrix[:3, :3].T + matrix[:3, 3]
            )
            keep &= (
                tree.query(moved, distance_upper_bound=NEIGHBOUR_REACH_ANGSTROM)[0]
                < np.inf
            )
        drawn.append(_ranges(keep))
    return drawn


def anchor_positions(structure: Structure, atoms: DrawnAtoms) -> NDArray[np.float64]:
    """Return where the bead of each polymer residue stands.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    atoms : DrawnAtoms
        Atoms that the page carries.

    Returns
    -------
    ndarray of float, shape (n_drawn, 3)
        In Å.
    """
    return structure.position[atoms.atom[atoms.anchor]]


def _ranges(keep: NDArray[np.bool_]) -> list[tuple[int, int]]:
    edges = np.flatnonzero(
        np.diff(np.concatenate([[False], keep, [False]]).astype(int))
    )
    return [(int(a), int(b)) for a, b in list(pairwise(edges))[::2]]


def images_payload(
    record: AnalysisRecord, images: Images, drawn: list[list[tuple[int, int]]]
) -> list[dict[str, Any]]:
    """Return the neighbours as the page wants them.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    images : Images
        Neighbours that touch the molecule.
    drawn : list of list of (int, int)
        Residues drawn of each.

    Returns
    -------
    list of dict
        Operator, shift, numeral, matrix, residues.
    """
    numeral = _numeral_of_image(record, images)
    crystal = record.structure.crystal
    return [
        {
            "operator": crystal.triplets[key[0]] if crystal and key[0] >= 0 else "",
            "assembly": key[4],
            "shift": list(key[1:4]),
            "numeral": numeral.get(index, ""),
            "inverse": images.inverse[index],
            "matrix": np.round(images.matrices[index][:3], 6).ravel().tolist(),
            "drawn": drawn[index],
        }
        for index, key in enumerate(images.keys)
    ]


def _numeral_of_image(record: AnalysisRecord, images: Images) -> dict[int, str]:
    numbered = record.packing.numbered
    found: dict[int, str] = {}
    for contact in np.flatnonzero(numbered.of_contact >= 0):
        numeral = numbered.crystal_contacts[numbered.of_contact[contact]].numeral
        found[int(images.of_contact[contact])] = numeral
        found[int(images.back_of_contact[contact])] = numeral
    return found


def contacts_payload(record: AnalysisRecord, images: Images) -> dict[str, Any]:
    """Return the contacts as columns.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    images : Images
        Neighbours that touch the molecule.

    Returns
    -------
    dict
        Residues, kind, distance, image, numeral and closest atoms of each contact.
    """
    contacts, structure = record.contacts, record.structure
    numbered = record.packing.numbered
    numerals = [c.numeral for c in numbered.crystal_contacts]
    return {
        "a": contacts.residue_1.tolist(),
        "b": contacts.residue_2.tolist(),
        "kind": contacts.kind.tolist(),
        "distance": np.round(contacts.distance_angstrom, 2).tolist(),
        "image": images.of_contact.tolist(),
        "numeral": [
            numerals[n] if n >= 0 else "" for n in numbered.of_contact.tolist()
        ],
        "atomA": structure.atom_name[contacts.atom_1].tolist(),
        "atomB": structure.atom_name[contacts.atom_2].tolist(),
        "complex": COMPLEX,
        "lattice": LATTICE,
    }
