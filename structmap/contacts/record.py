"""Contacts between residues and the graph of measured sites."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only

CHAIN, COMPLEX, LATTICE = 0, 1, 2
KINDS = ("chain", "complex", "lattice")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Contacts:
    """Residue contacts, sorted by (residue_1, residue_2, operator, shift).

    The second residue stands in the image made by operator and shift, the first in the
    molecule as the file has it; of the two ways to write a contact the one with the
    lexicographically smaller key is kept.

    Attributes
    ----------
    reach_angstrom : float
        Every contact up to this distance is here.
    residue_1, residue_2 : ndarray of int, shape (n_contacts,)
        Indices of residues of the structure (polymer; NCS copies are residues of their
        own).
    operator : ndarray of int, shape (n_contacts,)
        Index of the crystal's operator, 0 for the identity; -1 for a mate that only an
        assembly makes.
    shift : ndarray of int, shape (n_contacts, 3)
        Whole cells.
    assembly_operator : ndarray of str, shape (n_contacts,)
        ``assembly id:operator number`` of a mate that only an assembly makes, else
        blank.
    kind : ndarray of int, shape (n_contacts,)
        ``CHAIN``, ``COMPLEX`` or ``LATTICE``.
    distance_angstrom : ndarray of float, shape (n_contacts,)
        Shortest distance between allowed heavy atoms; for an ensemble the one that half
        of the models reach.
    atom_1, atom_2 : ndarray of int, shape (n_contacts,)
        The closest pair, indices of atoms of the structure.
    n_atom_pairs : ndarray of int, shape (n_contacts,)
        Atom pairs within ``reach_angstrom`` (of the first model).
    share_of_models : ndarray of float, shape (n_contacts,)
        Share of the models within ``reach_angstrom``; 1 without an ensemble.
    """

    reach_angstrom: float
    residue_1: NDArray[np.int64]
    residue_2: NDArray[np.int64]
    operator: NDArray[np.int64]
    shift: NDArray[np.int64]
    assembly_operator: NDArray[np.str_]
    kind: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]
    atom_1: NDArray[np.int64]
    atom_2: NDArray[np.int64]
    n_atom_pairs: NDArray[np.int64]
    share_of_models: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = len(self.residue_1)
        for name in ("residue_1", "residue_2", "operator", "kind", "atom_1", "atom_2"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "shift", np.int64, (n, 3))
        store_read_only(self, "assembly_operator", np.str_, (n,))
        store_read_only(self, "n_atom_pairs", np.int64, (n,))
        for name in ("distance_angstrom", "share_of_models"):
            store_read_only(self, name, np.float64, (n,))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SiteGraph:
    """Measured sites and which of them touch, in any copy and image.

    Attributes
    ----------
    n_sites : int
        Sites with a residue; indices run over all sites of the match.
    site_1, site_2 : ndarray of int, shape (n_edges,)
        Sorted pairs with ``site_1 < site_2``, each once.
    kind : ndarray of int, shape (n_edges,)
        The closest relation over all pairs of copies within the cutoff.
    distance_angstrom : ndarray of float, shape (n_edges,)
        The shortest distance over all pairs of copies.
    """

    n_sites: int
    site_1: NDArray[np.int64]
    site_2: NDArray[np.int64]
    kind: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = len(self.site_1)
        for name in ("site_1", "site_2", "kind"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "distance_angstrom", np.float64, (n,))
