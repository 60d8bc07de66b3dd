"""One node a residue, one spring a pair of nodes that stand close."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array, diags_array

from structmap.contacts import COMPLEX, find_contacts
from structmap.records import store_read_only
from structmap.structure import POLYMER, Assembly, Structure

SPRING_ANGSTROM = 7.3
Surroundings = Literal["isolated", "assembly", "crystal"]
SURROUNDINGS: tuple[Surroundings, ...] = ("isolated", "assembly", "crystal")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ElasticNetwork:
    """Nodes and springs over the whole crystal.

    Attributes
    ----------
    residue : ndarray of int, shape (n_nodes,)
        Polymer residues that have a CA (P in nucleic acids), rising.
    b_iso : ndarray of float, shape (n_nodes,)
        B factor of that atom in Å^2.
    first, second : ndarray of int, shape (n_springs,)
        Nodes; the second stands in some image. Springs of a node to its own image are
        left out: copies move together, so such a spring never stretches.
    kind : ndarray of int, shape (n_springs,)
        ``CHAIN``, ``COMPLEX`` or ``LATTICE``.
    in_file : ndarray of bool, shape (n_springs,)
        Whether both ends stand as the file has them.
    """

    residue: NDArray[np.int64]
    b_iso: NDArray[np.float64]
    first: NDArray[np.int64]
    second: NDArray[np.int64]
    kind: NDArray[np.int64]
    in_file: NDArray[np.bool_]

    def __post_init__(self) -> None:
        store_read_only(self, "residue", np.int64, (None,))
        store_read_only(self, "b_iso", np.float64, (len(self.residue),))
        for name in ("first", "second", "kind"):
            store_read_only(self, name, np.int64, (len(self.in_file),))
        store_read_only(self, "in_file", np.bool_, (None,))


def build_network(
    structure: Structure,
    assemblies: Sequence[Assembly],
    *,
    spring_angstrom: float = SPRING_ANGSTROM,
) -> ElasticNetwork:
    """Return the Gaussian network of a structure and of its crystal.

    Parameters
    ----------
    structure : Structure
        Of an ensemble the first model counts.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`.
    spring_angstrom : float, default 7.3
        Largest distance between two nodes with a spring; the default is that of [2]_.

    Returns
    -------
    ElasticNetwork
        Springs of equal strength [1]_, in the crystal between all images [2]_.

    Raises
    ------
    ValueError
        If no residue has such an atom.

    References
    ----------
    .. [1] Bahar, Atilgan and Erman, Fold. Des. 2, 173 (1997; cited from memory).
    .. [2] Kundu, Melton, Sorensen and Phillips, Biophys. J. 83, 723 (2002; cited from
       memory).
    """
    atoms = _node_atoms(structure)
    if not len(atoms):
        raise ValueError(f"{structure.name} has no CA or P atoms to make a network of")
    bare = _with_atoms(structure, atoms)
    found = find_contacts(bare, reach_angstrom=spring_angstrom, assemblies=assemblies)
    residue = structure.residue_of_atom[atoms]
    first = np.searchsorted(residue, found.residue_1)
    second = np.searchsorted(residue, found.residue_2)
    apart = first != second
    in_file = (found.operator == 0) & ~found.shift.any(axis=1)
    return ElasticNetwork(
        residue=residue,
        b_iso=structure.b_iso[atoms],
        first=first[apart],
        second=second[apart],
        kind=found.kind[apart],
        in_file=in_file[apart],
    )


def _node_atoms(structure: Structure) -> NDArray[np.int64]:
    """Return one atom a residue, in the order of the residues."""
    residue = structure.residue_of_atom
    is_carbon = (structure.atom_name == "CA") & (structure.element != "CA")
    usable = is_carbon | (structure.atom_name == "P")
    usable &= structure.kind_of_residue[residue] == POLYMER
    usable &= structure.model_of_atom == structure.model_of_atom.min(initial=0)
    atoms = np.flatnonzero(usable)
    atoms = atoms[np.lexsort((atoms, -structure.occupancy[atoms], residue[atoms]))]
    return np.asarray(atoms[np.unique(residue[atoms], return_index=True)[1]])


def _with_atoms(structure: Structure, atoms: NDArray[np.int64]) -> Structure:
    columns = ("position", "residue_of_atom", "model_of_atom", "atom_name", "element")
    kept = {name: getattr(structure, name)[atoms] for name in columns}
    kept |= {name: getattr(structure, name)[atoms] for name in ("occupancy", "b_iso")}
    # One atom is left of each residue: letters of conformations mean nothing any more.
    return replace(structure, n_models=1, altloc=np.full(len(atoms), ""), **kept)


def laplacian_of(network: ElasticNetwork, surroundings: Surroundings) -> csr_array:
    """Return the connectivity matrix of a network.

    Parameters
    ----------
    network : ElasticNetwork
        The network.
    surroundings : {'isolated', 'assembly', 'crystal'}
        Springs among the coordinates of the file alone, those of chain and complex
        contacts, or all, with the copies in all images moving alike.

    Returns
    -------
    sparse array of float, shape (n_nodes, n_nodes)
        Off the diagonal minus the number of springs of a pair, on it minus the sum of
        the row.
    """
    chosen = {
        "isolated": network.in_file,
        "assembly": network.kind <= COMPLEX,
        "crystal": np.ones_like(network.in_file),
    }[surroundings]
    n_nodes = len(network.residue)
    first, second = network.first[chosen], network.second[chosen]
    half = coo_array((np.ones(len(first)), (first, second)), shape=(n_nodes, n_nodes))
    springs = csr_array(half + half.T)
    return csr_array(diags_array(springs.sum(axis=0)) - springs)
