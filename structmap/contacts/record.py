"""Contacts between residues and the graph of measured sites."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only
from structmap.structure import LOW_CONFIDENCE, VERY_LOW_CONFIDENCE

CHAIN, COMPLEX, LATTICE = 0, 1, 2
KINDS = ("chain", "complex", "lattice")


def _nothing() -> NDArray[np.float64]:
    return np.zeros(0)


def _nothing_weak() -> NDArray[np.bool_]:
    return np.zeros(0, dtype=np.bool_)


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
        Indices of residues of the structure: of the polymer and measured parts of
        ligands; NCS copies are residues of their own.
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
    confidence : ndarray of float, shape (n_contacts,), optional
        In a predicted model the lower confidence of the two residues, 0 to 100. NaN, as
        by default, where coordinates were measured, and of neighbours that the chain
        joins by a bond: that holds whatever the prediction.
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
    confidence: NDArray[np.float64] = field(default_factory=_nothing)

    def __post_init__(self) -> None:
        n = len(self.residue_1)
        for name in ("residue_1", "residue_2", "operator", "kind", "atom_1", "atom_2"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "shift", np.int64, (n, 3))
        store_read_only(self, "assembly_operator", np.str_, (n,))
        store_read_only(self, "n_atom_pairs", np.int64, (n,))
        if not len(self.confidence):
            object.__setattr__(self, "confidence", np.full(n, np.nan))
        for name in ("distance_angstrom", "share_of_models", "confidence"):
            store_read_only(self, name, np.float64, (n,))

    @property
    def weak(self) -> NDArray[np.bool_]:
        """Tell which contacts rest on a residue that was predicted with low confidence.

        Returns
        -------
        ndarray of bool, shape (n_contacts,)
            Confidence below 70.
        """
        return np.asarray(self.confidence < LOW_CONFIDENCE)

    @property
    def joins(self) -> NDArray[np.bool_]:
        """Tell which contacts may join residues to a unit.

        Returns
        -------
        ndarray of bool, shape (n_contacts,)
            All but those of a confidence below 50, where a prediction is not to be
            interpreted.
        """
        return np.asarray(~(self.confidence < VERY_LOW_CONFIDENCE))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SiteGraph:
    """Measured sites and which of them touch, in any copy and image.

    Attributes
    ----------
    n_sites : int
        One more than the last site with a residue.
    site_1, site_2 : ndarray of int, shape (n_edges,)
        Sorted pairs with ``site_1 < site_2``, each once.
    kind : ndarray of int, shape (n_edges,)
        The closest relation over all pairs of copies within the cutoff.
    distance_angstrom : ndarray of float, shape (n_edges,)
        The shortest distance over all pairs of copies.
    weak : ndarray of bool, shape (n_edges,), optional
        Whether all contacts of the two rest on a residue of a predicted model that has
        low confidence; False by default.
    """

    n_sites: int
    site_1: NDArray[np.int64]
    site_2: NDArray[np.int64]
    kind: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]
    weak: NDArray[np.bool_] = field(default_factory=_nothing_weak)

    def __post_init__(self) -> None:
        n = len(self.site_1)
        for name in ("site_1", "site_2", "kind"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "distance_angstrom", np.float64, (n,))
        if not len(self.weak):
            object.__setattr__(self, "weak", np.zeros(n, dtype=np.bool_))
        store_read_only(self, "weak", np.bool_, (n,))
