"""Which atoms can give or take a hydrogen bond, carry charge, or are apolar."""

import numpy as np
from numpy.typing import NDArray

from structmap.structure import POLYMER, Structure, one_letter

CATION, ANION, DONOR, ACCEPTOR, APOLAR, THIOL, CATION_CENTRE, RING = (
    1 << bit for bit in range(8)
)

_CATIONS = {"R": "NE NH1 NH2", "K": "NZ"}
_ANIONS = {"D": "OD1 OD2", "E": "OE1 OE2"}
_DONORS = {
    "R": "NE NH1 NH2",
    "K": "NZ",
    "N": "ND2",
    "Q": "NE2",
    "H": "ND1 NE2",
    "S": "OG",
    "T": "OG1",
    "Y": "OH",
    "W": "NE1",
}
_ACCEPTORS = {
    "D": "OD1 OD2",
    "E": "OE1 OE2",
    "N": "OD1",
    "Q": "OE1",
    "H": "ND1 NE2",
    "S": "OG",
    "T": "OG1",
    "Y": "OH",
}
_BASE_DONORS = {"A": "N6", "G": "N1 N2", "C": "N4", "T": "N3", "U": "N3"}
_BASE_ACCEPTORS = {
    "A": "N1 N3 N7",
    "G": "O6 N3 N7",
    "C": "O2 N3",
    "T": "O2 O4",
    "U": "O2 O4",
}
_APOLAR = frozenset("AVLIMFWPYC")
_CATION_CENTRES = {"R": "CZ", "K": "NZ"}
_BACKBONE = frozenset({"N", "CA", "C", "O", "OXT"})
_SUGAR_DONORS = frozenset({"O2'"})
RINGS = {
    "F": ("CG CD1 CD2 CE1 CE2 CZ",),
    "Y": ("CG CD1 CD2 CE1 CE2 CZ",),
    "W": ("CG CD1 CD2 NE1 CE2", "CD2 CE2 CE3 CZ2 CZ3 CH2"),
}


def atom_types(structure: Structure) -> NDArray[np.int64]:
    """Return what each atom can take part in.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    ndarray of int, shape (n_atoms,)
        Bits ``CATION``, ``ANION``, ``DONOR``, ``ACCEPTOR``, ``APOLAR``, ``THIOL``
        and ``CATION_CENTRE``; 0 outside the polymer.

    Notes
    -----
    A modified residue has the types of its parent for the atoms that it shares with
    it; its other nitrogens are taken as donors, its other oxygens as acceptors. The
    nitrogen of proline has no hydrogen and is no donor. Histidine is not charged here.
    """
    polymer_type = np.array([c.polymer_type for c in structure.chain_copies])
    copy = structure.copy_of_residue
    kind = np.where(copy >= 0, polymer_type[copy], "")
    kind[structure.kind_of_residue != POLYMER] = ""
    residue_keys, residue_code = np.unique(
        np.char.add(np.char.add(kind, "|"), structure.auth_comp_id), return_inverse=True
    )
    names, name_code = np.unique(structure.atom_name, return_inverse=True)
    elements, element_code = np.unique(structure.element, return_inverse=True)
    code = residue_code.reshape(-1)[structure.residue_of_atom]
    code = code * len(names) + name_code.reshape(-1)
    code = code * len(elements) + element_code.reshape(-1)
    distinct, which = np.unique(code, return_inverse=True)
    types = []
    for number in distinct.tolist():
        rest, element = divmod(number, len(elements))
        residue, name = divmod(rest, len(names))
        of, _, comp_id = str(residue_keys[residue]).partition("|")
        types.append(
            _types(of, comp_id, str(names[name]), str(elements[element]).upper())
        )
    return np.array(types, dtype=np.int64)[which.reshape(-1)]


def _types(of: str, comp_id: str, name: str, element: str) -> int:
    letter = one_letter(comp_id)
    if of == "peptide":
        return _peptide_types(letter, name, element)
    if of == "nucleic":
        return _nucleic_types(letter, name, element)
    return 0


def _peptide_types(letter: str, name: str, element: str) -> int:
    if name in _BACKBONE:
        donor = DONOR if name == "N" and letter != "P" else 0
        return donor | (ACCEPTOR if name in ("O", "OXT") else 0)
    listed = {
        CATION: _CATIONS,
        ANION: _ANIONS,
        DONOR: _DONORS,
        ACCEPTOR: _ACCEPTORS,
        CATION_CENTRE: _CATION_CENTRES,
    }
    found = _listed(listed, letter, name)
    if letter in _APOLAR and element in ("C", "S", "SE"):
        found |= APOLAR
    if letter == "C" and name == "SG":
        found |= THIOL
    return found or _by_element(element)


def _nucleic_types(letter: str, name: str, element: str) -> int:
    found = _listed({DONOR: _BASE_DONORS, ACCEPTOR: _BASE_ACCEPTORS}, letter, name)
    if name in _SUGAR_DONORS:
        return DONOR | ACCEPTOR
    if letter in _BASE_DONORS and element == "N":
        return found  # the nitrogen that holds the sugar is neither
    return found or _by_element(element)


def _listed(listed: dict[int, dict[str, str]], letter: str, name: str) -> int:
    return sum(
        bit for bit, names in listed.items() if name in names.get(letter, "").split()
    )


def _by_element(element: str) -> int:
    return {"N": DONOR, "O": ACCEPTOR}.get(element, 0)


def find_ring_centres(
    structure: Structure,
) -> tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.str_]]:
    """Return the centres of the rings of Phe, Tyr and Trp.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    first : ndarray of int, shape (n_rings,)
        First atom of each ring. Each conformation counts as a ring, Trp has two, and
        rings that lack an atom are left out.
    centre : ndarray of float, shape (n_rings, 3)
        Mean of the atoms of each ring, in Å.
    letter : ndarray of str, shape (n_rings,)
        Alternate-conformation letter of each ring.
    """
    names, which = np.unique(structure.auth_comp_id, return_inverse=True)
    letters = np.array([one_letter(str(name)) for name in names])
    parent = np.where(
        structure.kind_of_residue == POLYMER, letters[which.reshape(-1)], ""
    )
    found = []
    for kind, rings in RINGS.items():
        of_kind = np.flatnonzero((parent == kind)[structure.residue_of_atom])
        for ring in rings:
            inside = np.isin(structure.atom_name[of_kind], ring.split())
            found += _ring_centres(structure, of_kind[inside], len(ring.split()))
    first, centre, letter = (
        np.concatenate(column) for column in zip(*found, strict=True)
    )
    return first, centre, letter


def _ring_centres(
    structure: Structure, atom: NDArray[np.int64], size: int
) -> list[tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.str_]]]:
    """Return first atoms, centres and letters of rings, a letter at a time."""
    letter, residue = structure.altloc[atom], structure.residue_of_atom[atom]
    out = []
    for one in np.unique(np.append(letter, "")):
        has = np.unique(residue[letter == one]) if one else np.unique(residue)
        if not one:
            has = np.setdiff1d(has, residue[letter != ""])
        own = np.isin(residue, has) & ((letter == one) | (letter == ""))
        _, start, count = np.unique(residue[own], return_index=True, return_counts=True)
        whole = np.flatnonzero(count == size)
        first = atom[own][start[whole]]
        sums = (
            np.add.reduceat(structure.position[atom[own]], start, axis=0)
            if len(start)
            else 0
        )
        centre = (
            np.reshape(sums, (-1, 3))[whole] / size if len(start) else np.zeros((0, 3))
        )
        out.append((first, centre, np.full(len(first), one)))
    return out
