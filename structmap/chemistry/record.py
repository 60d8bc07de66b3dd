"""What the search for the chemistry of contacts hands on."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.chemistry.bridges import Bridges
from structmap.records import store_read_only

CHEMISTRY_KINDS = (
    "covalent bond",
    "disulfide",
    "salt bridge",
    "hydrogen bond",
    "cation-pi",
    "aromatic",
    "hydrophobic",
    "clash",
    "metal",
    "water bridge",
)
(
    COVALENT_BOND,
    DISULFIDE,
    SALT_BRIDGE,
    HYDROGEN_BOND,
    CATION_PI,
    AROMATIC,
    HYDROPHOBIC,
    CLASH,
    METAL,
    WATER_BRIDGE,
) = range(len(CHEMISTRY_KINDS))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Chemistry:
    """What the geometry of each contact is compatible with.

    A contact may be of several kinds; each stands once with its shortest distance.

    Attributes
    ----------
    contact : ndarray of int, shape (n_tags,)
        Index of the contact, rising.
    kind : ndarray of int, shape (n_tags,)
        Place in ``CHEMISTRY_KINDS``.
    distance_angstrom : ndarray of float, shape (n_tags,)
        Shortest distance of that kind; of a bridge its longer leg; to the centre of a
        ring where there is one.
    atom_1, atom_2 : ndarray of int, shape (n_tags,)
        Atoms of the structure; for a ring its first atom. Of a bridge the two atoms at
        the ends.
    bridges : Bridges
        Residues held together by a water or a metal, in direct contact or not.
    text : ndarray of str, shape (n_contacts,)
        For each contact its kinds with distances in Å, ``salt bridge 2.9; hydrogen
        bond 2.9``; blank where there is none.
    """

    contact: NDArray[np.int64]
    kind: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]
    atom_1: NDArray[np.int64]
    atom_2: NDArray[np.int64]
    bridges: Bridges
    text: NDArray[np.str_]

    def __post_init__(self) -> None:
        n = len(self.contact)
        for name in ("contact", "kind", "atom_1", "atom_2"):
            store_read_only(self, name, np.int64, (n,))
        store_read_only(self, "distance_angstrom", np.float64, (n,))
        store_read_only(self, "text", np.str_, (None,))

    def contacts_of(self, kind: str) -> NDArray[np.int64]:
        """Return the contacts of one kind.

        Parameters
        ----------
        kind : str
            One of ``CHEMISTRY_KINDS``.

        Returns
        -------
        ndarray of int, shape (n,)
            Indices of contacts, rising.
        """
        return np.asarray(self.contact[self.kind == CHEMISTRY_KINDS.index(kind)])
