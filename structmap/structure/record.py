"""What a coordinate file holds, as arrays."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only

POLYMER, LIGAND, WATER, LIGAND_PART = 0, 1, 2, 3


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Crystal:
    """Cell and symmetry of a crystal.

    Attributes
    ----------
    cell : tuple of float
        a, b, c in Å and alpha, beta, gamma in degrees.
    space_group : str
        Short Hermann-Mauguin symbol of the setting (``P 21 21 21``).
    orthogonalisation, orthogonalisation_shift : ndarray, shape (3, 3) and (3,)
        Cartesian = matrix @ fractional + shift, as the file has them.
    fractionalisation, fractionalisation_shift : ndarray, shape (3, 3) and (3,)
        Fractional = matrix @ Cartesian + shift.
    rotations : ndarray of int, shape (n_operators, 3, 3)
        Rotation parts of the operators, centring included, the identity first.
    translations : ndarray of int, shape (n_operators, 3)
        Translation parts in 24ths of a cell edge.
    triplets : tuple of str
        The operators as the International Tables write them (``-x,y+1/2,-z+1/2``).
    """

    cell: tuple[float, float, float, float, float, float]
    space_group: str
    orthogonalisation: NDArray[np.float64]
    orthogonalisation_shift: NDArray[np.float64]
    fractionalisation: NDArray[np.float64]
    fractionalisation_shift: NDArray[np.float64]
    rotations: NDArray[np.int64]
    translations: NDArray[np.int64]
    triplets: tuple[str, ...]

    def __post_init__(self) -> None:
        for name in ("orthogonalisation", "fractionalisation"):
            store_read_only(self, name, np.float64, (3, 3))
            store_read_only(self, f"{name}_shift", np.float64, (3,))
        store_read_only(self, "rotations", np.int64, (len(self.triplets), 3, 3))
        store_read_only(self, "translations", np.int64, (len(self.triplets), 3))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ChainCopy:
    """One polymer chain of the coordinates, or a copy of it made by an NCS operator.

    Attributes
    ----------
    auth_asym_id : str
        Name of the chain in the file.
    label_asym_id : str
        Its polymer subchain.
    ncs : int
        0 for the chain as it stands in the file, else the number of the NCS operator.
    ncs_matrix : ndarray, shape (4, 4)
        Cartesian transform that made the copy; the identity for ``ncs`` 0.
    polymer_type : str
        ``peptide`` or ``nucleic`` or ``other``.
    sequence : tuple of str
        Component names of the full sequence, observed or not; those observed when the
        file states no sequence.
    """

    auth_asym_id: str
    label_asym_id: str
    ncs: int
    ncs_matrix: NDArray[np.float64]
    polymer_type: str
    sequence: tuple[str, ...]

    def __post_init__(self) -> None:
        store_read_only(self, "ncs_matrix", np.float64, (4, 4))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Assembly:
    """A biological assembly of the file.

    Attributes
    ----------
    name : str
        Its id.
    by_author, by_software : bool
        Who determined it.
    oligomer : str
        What the file calls it (``dimeric``); blank when it says nothing.
    chains : tuple of tuple of str
        For each operator, the author chain names that it moves.
    matrices : ndarray, shape (n_operators, 4, 4)
        Cartesian transforms.
    """

    name: str
    by_author: bool
    by_software: bool
    oligomer: str
    chains: tuple[tuple[str, ...], ...]
    matrices: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "matrices", np.float64, (len(self.chains), 4, 4))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Structure:
    """A coordinate file as arrays.

    Residues of NCS copies are residues of their own; ``original_residue`` leads back.
    Polymer residues come first, in the order of the chain copies; after them ligand
    residues and waters, one an entry. `part_residues` puts measured parts of ligands
    between the polymer and the ligands.

    Attributes
    ----------
    name : str
        Name of the file without its folder.
    sha256 : str
        SHA-256 of the bytes of the file.
    entry_id, title, method : str
        What the file says of itself; blank when it says nothing.
    resolution_angstrom : float
        NaN when not stated.
    crystal : Crystal or None
        None when the file holds no crystal.
    no_crystal_reason : str
        Why not, in words that can follow "because"; blank for a crystal.
    chain_copies : tuple of ChainCopy
        Polymer chains and their NCS copies.
    assemblies : tuple of Assembly
        As listed in the file.
    n_models : int
        Models that are used: 1 for a crystal.
    ca_only : bool
        Fewer than 1.5 heavy atoms a polymer residue.
    is_predicted : bool
        A predicted model, whose B column holds the confidence in each residue (pLDDT,
        0 to 100).
    warnings : tuple of str
        What is odd about the file, one sentence each.
    kind_of_residue : ndarray of int, shape (n_residues,)
        ``POLYMER``, ``LIGAND``, ``WATER`` or ``LIGAND_PART``, an atom of a ligand or
        the whole of it that contacts are found for as for a residue of the polymer.
    copy_of_residue : ndarray of int, shape (n_residues,)
        Index into ``chain_copies``, -1 for ligands and waters; for a part of a ligand
        the chain that it belongs to.
    original_residue : ndarray of int, shape (n_residues,)
        The residue that this one is an NCS copy of; itself when it is none.
    auth_asym_id, label_asym_id, auth_comp_id, ins_code : ndarray of str
        Shape (n_residues,); a blank insertion code is the empty string.
    auth_seq_id : ndarray of int, shape (n_residues,)
    label_seq_id : ndarray of int, shape (n_residues,)
        -1 where the file has none.
    secondary_structure : ndarray of str, shape (n_residues,)
        ``H`` helix, ``E`` strand, blank neither or not recorded.
    has_secondary_structure : bool
        Whether the file records any.
    position : ndarray of float, shape (n_atoms, 3)
        In Å. Hydrogens and atoms of zero occupancy are left out; all alternate
        conformations are kept.
    residue_of_atom, model_of_atom : ndarray of int, shape (n_atoms,)
        Atoms are sorted by model, then by residue.
    atom_name, element, altloc : ndarray of str, shape (n_atoms,)
    occupancy, b_iso : ndarray of float, shape (n_atoms,)
    """

    name: str
    sha256: str
    entry_id: str
    title: str
    method: str
    resolution_angstrom: float
    crystal: Crystal | None
    no_crystal_reason: str
    chain_copies: tuple[ChainCopy, ...]
    assemblies: tuple[Assembly, ...]
    n_models: int
    ca_only: bool
    is_predicted: bool
    warnings: tuple[str, ...]
    kind_of_residue: NDArray[np.int64]
    copy_of_residue: NDArray[np.int64]
    original_residue: NDArray[np.int64]
    auth_asym_id: NDArray[Any]
    label_asym_id: NDArray[Any]
    auth_comp_id: NDArray[Any]
    ins_code: NDArray[Any]
    auth_seq_id: NDArray[np.int64]
    label_seq_id: NDArray[np.int64]
    secondary_structure: NDArray[Any]
    has_secondary_structure: bool
    position: NDArray[np.float64]
    residue_of_atom: NDArray[np.int64]
    model_of_atom: NDArray[np.int64]
    atom_name: NDArray[Any]
    element: NDArray[Any]
    altloc: NDArray[Any]
    occupancy: NDArray[np.float64]
    b_iso: NDArray[np.float64]

    def __post_init__(self) -> None:
        n_residues, n_atoms = len(self.kind_of_residue), len(self.position)
        for name in ("kind_of_residue", "copy_of_residue", "original_residue"):
            store_read_only(self, name, np.int64, (n_residues,))
        for name in ("auth_seq_id", "label_seq_id"):
            store_read_only(self, name, np.int64, (n_residues,))
        for name in ("auth_asym_id", "label_asym_id", "auth_comp_id", "ins_code"):
            store_read_only(self, name, np.str_, (n_residues,))
        store_read_only(self, "secondary_structure", np.str_, (n_residues,))
        store_read_only(self, "position", np.float64, (n_atoms, 3))
        for name in ("residue_of_atom", "model_of_atom"):
            store_read_only(self, name, np.int64, (n_atoms,))
        for name in ("atom_name", "element", "altloc"):
            store_read_only(self, name, np.str_, (n_atoms,))
        for name in ("occupancy", "b_iso"):
            store_read_only(self, name, np.float64, (n_atoms,))
