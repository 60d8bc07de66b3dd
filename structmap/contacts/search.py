"""Pairs of residues that come close, for one image of the molecule at a time."""

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from structmap.structure import LIGAND_PART, POLYMER, Structure

SPECIAL_ANGSTROM = 0.8  # an atom this close to its own image is one atom on an axis
LARGEST_GRID = 20_000_000
LONGEST_BOND_ANGSTROM = 2.0  # C-N is 1.33, O3'-P 1.61
LONGEST_CA_STEP_ANGSTROM = 4.2  # 3.8 from CA to CA


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ResiduePairs:
    """Residue pairs within reach, each once an image.

    Attributes
    ----------
    image : ndarray of int, shape (n,)
        Which image the second stands in; 0 for the molecule itself.
    first, second : ndarray of int, shape (n,)
        Residues.
    distance_angstrom : ndarray of float, shape (n,)
        Shortest over allowed atom pairs.
    atom_1, atom_2 : ndarray of int, shape (n,)
        Atoms of the structure at that distance.
    n_atom_pairs : ndarray of int, shape (n,)
    """

    image: NDArray[np.int64]
    first: NDArray[np.int64]
    second: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]
    atom_1: NDArray[np.int64]
    atom_2: NDArray[np.int64]
    n_atom_pairs: NDArray[np.int64]

    def at(self, index: NDArray[np.int64]) -> "ResiduePairs":
        """Return some of the pairs.

        Parameters
        ----------
        index : ndarray of int, shape (n,)
            Which pairs.

        Returns
        -------
        ResiduePairs
            The pairs.
        """
        return ResiduePairs(
            **{name: getattr(self, name)[index] for name in PAIR_COLUMNS}
        )

    def seen_from_second(self, flipped: NDArray[np.bool_]) -> "ResiduePairs":
        """Return the pairs, some with first and second exchanged.

        Parameters
        ----------
        flipped : ndarray of bool, shape (n,)
            Pairs to turn round.

        Returns
        -------
        ResiduePairs
            The pairs.
        """
        return replace(
            self,
            first=np.where(flipped, self.second, self.first),
            second=np.where(flipped, self.first, self.second),
            atom_1=np.where(flipped, self.atom_2, self.atom_1),
            atom_2=np.where(flipped, self.atom_1, self.atom_2),
        )


PAIR_COLUMNS = tuple(column.name for column in fields(ResiduePairs))


def join_pairs(parts: Sequence[ResiduePairs]) -> ResiduePairs:
    """Return the pairs of several lists one after the other.

    Parameters
    ----------
    parts : sequence of ResiduePairs
        At least one.

    Returns
    -------
    ResiduePairs
        The pairs.
    """
    return ResiduePairs(
        **{
            name: np.concatenate([getattr(part, name) for part in parts])
            for name in PAIR_COLUMNS
        }
    )


def no_pairs() -> ResiduePairs:
    """Return an empty list of pairs.

    Returns
    -------
    ResiduePairs
        Without any pair.
    """
    nothing = np.zeros(0, dtype=np.int64)
    return ResiduePairs(
        image=nothing,
        first=nothing,
        second=nothing,
        distance_angstrom=np.zeros(0),
        atom_1=nothing,
        atom_2=nothing,
        n_atom_pairs=nothing,
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class AtomPairs:
    """Atom pairs within reach, the second in an image.

    Attributes
    ----------
    image : ndarray of int, shape (n,)
        Which image; 0 for the molecule itself.
    first, second : ndarray of int, shape (n,)
        Indices into the atoms of the molecule searched.
    distance_angstrom : ndarray of float, shape (n,)
    """

    image: NDArray[np.int64]
    first: NDArray[np.int64]
    second: NDArray[np.int64]
    distance_angstrom: NDArray[np.float64]

    def where(self, keep: NDArray[np.bool_]) -> "AtomPairs":
        """Return some of the pairs.

        Parameters
        ----------
        keep : ndarray of bool, shape (n,)
            Pairs to keep.

        Returns
        -------
        AtomPairs
            The pairs.
        """
        return AtomPairs(
            image=self.image[keep],
            first=self.first[keep],
            second=self.second[keep],
            distance_angstrom=self.distance_angstrom[keep],
        )


def polymer_atoms(
    structure: Structure, model: int, *, residues: NDArray[np.bool_]
) -> NDArray[np.int64]:
    """Return the atoms of some polymer residues and parts of ligands in one model.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    model : int
        Rank of the model.
    residues : ndarray of bool, shape (n_residues,)
        Residues that take part; whole ligands and waters do not.

    Returns
    -------
    ndarray of int, shape (n,)
        Rising indices of atoms.
    """
    taken = residues & np.isin(structure.kind_of_residue, (POLYMER, LIGAND_PART))
    of_model = structure.model_of_atom == model
    return np.flatnonzero(of_model & taken[structure.residue_of_atom])


class Molecule:
    """The polymer atoms of one model, ready to be searched.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    model : int
        Rank of the model.
    reach_angstrom : float
        Largest distance that counts.
    residues : ndarray of bool, shape (n_residues,)
        Residues that take part; others than those of polymers do not.

    Raises
    ------
    ValueError
        If no atom takes part.
    """

    def __init__(
        self,
        structure: Structure,
        *,
        model: int,
        reach_angstrom: float,
        residues: NDArray[np.bool_],
    ) -> None:
        self.atom = polymer_atoms(structure, model, residues=residues)
        if not self.atom.size:
            raise ValueError(f"no atom of model {model} takes part")
        self.reach = reach_angstrom
        self.position = structure.position[self.atom]
        self.residue = structure.residue_of_atom[self.atom]
        letters = structure.altloc[self.atom]
        code = np.unique(letters, return_inverse=True)[1] + 1
        self.altloc = np.where(letters == "", 0, code)
        self.n_residues = len(structure.kind_of_residue)
        names = structure.atom_name[self.atom]
        leaves = ("CA",) if structure.ca_only else ("C", "O3'")
        enters = ("CA",) if structure.ca_only else ("N", "P")
        self._leaves, self._enters = np.isin(names, leaves), np.isin(names, enters)
        self._longest_bond = (
            LONGEST_CA_STEP_ANGSTROM if structure.ca_only else LONGEST_BOND_ANGSTROM
        )
        self._copy = structure.copy_of_residue[self.residue]
        self._start = np.flatnonzero(np.diff(self.residue, prepend=-1))
        self._count = np.diff(self._start, append=len(self.atom))
        self._tree = cKDTree(self.position, balanced_tree=False, compact_nodes=False)
        self._grid = _Grid(self.position, reach_angstrom)
        sums = np.add.reduceat(self.position, self._start, axis=0)
        self.centre = sums / self._count[:, None]
        spread = self.position - np.repeat(self.centre, self._count, axis=0)
        distance = np.sqrt(np.einsum("ij,ij->i", spread, spread))
        self.radius = np.maximum.reduceat(distance, self._start)
        self._pad = (reach_angstrom + self.radius)[:, None]
        self.low, self.high = self.position.min(axis=0), self.position.max(axis=0)

    def own_pairs(self) -> ResiduePairs:
        """Return the pairs within the molecule, each once, no residue with itself.

        Returns
        -------
        ResiduePairs
            With ``first < second``.
        """
        pairs = self._tree.query_pairs(self.reach, output_type="ndarray")
        pairs = pairs[self.residue[pairs[:, 0]] != self.residue[pairs[:, 1]]]
        if not self.altloc.any():
            return self._residue_pairs(self._measured(pairs))
        agree = self._altlocs_agree(*pairs.T)
        left_out = self._measured(pairs[~agree])
        pairs = pairs[agree]
        return self._with_bonded(self._residue_pairs(self._measured(pairs)), left_out)

    def _measured(self, pairs: NDArray[np.int64]) -> AtomPairs:
        """Return pairs of atoms in the molecule itself with their distances."""
        first, second = pairs.T
        squared = np.zeros(len(pairs))
        for axis in self.position.T:  # one axis at a time saves memory
            squared += (axis[first] - axis[second]) ** 2
        return AtomPairs(
            image=np.zeros(len(pairs), dtype=np.int64),
            first=first,
            second=second,
            distance_angstrom=np.sqrt(squared),
        )

    def _with_bonded(self, found: ResiduePairs, left_out: AtomPairs) -> ResiduePairs:
        """Add neighbours in the chain whose bonded atoms have unlike letters."""
        first, second = left_out.first, left_out.second
        bonded = (
            (self.residue[second] == self.residue[first] + 1)
            & (self._copy[first] == self._copy[second])
            & (self._leaves[first] & self._enters[second])
            & (left_out.distance_angstrom <= self._longest_bond)
        )
        if not bonded.any():
            return found
        extra = self._residue_pairs(left_out.where(bonded))
        known = found.first * self.n_residues + found.second
        new = ~np.isin(extra.first * self.n_residues + extra.second, known)
        return join_pairs([found, extra.at(np.flatnonzero(new))])

    def image_pairs(
        self, matrices: NDArray[np.float64], *, self_inverse: NDArray[np.bool_]
    ) -> ResiduePairs:
        """Return the pairs of the molecule with images of it.

        Parameters
        ----------
        matrices : ndarray of float, shape (n_images, 4, 4)
            Cartesian transforms that make the images.
        self_inverse : ndarray of bool, shape (n_images,)
            Whether the transform is its own inverse; then each pair is found from
            both sides and kept once, with ``first <= second``.

        Returns
        -------
        ResiduePairs
            Images are counted from 1. Atoms that lie on a symmetry element are not in
            contact with themselves, nor is a residue that lies on it as a whole.
        """
        found = self._image_atom_pairs(matrices)
        once = found.first <= found.second
        found = found.where(once | ~self_inverse[found.image - 1])
        if self.altloc.any():
            found = found.where(self._altlocs_agree(found.first, found.second))
        return self._residue_pairs(found.where(~self._on_elements(found)))

    def _on_elements(self, found: AtomPairs) -> NDArray[np.bool_]:
        """Return which pairs are of an atom or a residue that is its own image."""
        same = (found.first == found.second) & (
            found.distance_angstrom < SPECIAL_ANGSTROM
        )
        if not same.any():
            return np.asarray(same)
        key = found.image * self.n_residues + self.residue[found.first]
        places, hits = np.unique(key[same], return_counts=True)
        size = np.bincount(self.residue, minlength=self.n_residues)
        whole = places[2 * hits > size[places % self.n_residues]]
        own = self.residue[found.first] == self.residue[found.second]
        return np.asarray(same | (own & np.isin(key, whole)))

    def _altlocs_agree(
        self, first: NDArray[np.int64], second: NDArray[np.int64]
    ) -> NDArray[np.bool_]:
        one, two = self.altloc[first], self.altloc[second]
        return np.asarray((one == two) | (one == 0) | (two == 0))

    def _image_atom_pairs(self, matrices: NDArray[np.float64]) -> AtomPairs:
        parts = [self._atoms_near(matrix) for matrix in matrices]
        counts = [len(atoms) for atoms, _ in parts]
        if not sum(counts):
            nothing = np.zeros(0, dtype=np.int64)
            return AtomPairs(
                image=nothing,
                first=nothing,
                second=nothing,
                distance_angstrom=np.zeros(0),
            )
        image = np.repeat(np.arange(1, len(parts) + 1), counts)
        atoms = np.concatenate([atoms for atoms, _ in parts])
        positions = np.concatenate([position for _, position in parts])
        tree = cKDTree(positions, balanced_tree=False, compact_nodes=False)
        found = self._tree.sparse_distance_matrix(
            tree, self.reach, output_type="ndarray"
        )
        return AtomPairs(
            image=image[found["j"]],
            first=found["i"],
            second=atoms[found["j"]],
            distance_angstrom=found["v"],
        )

    def _atoms_near(
        self, matrix: NDArray[np.float64]
    ) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        """Return the atoms whose image may touch the molecule, and that image."""
        turn, move = matrix[:3, :3].T, matrix[:3, 3]
        centre = self.centre @ turn + move
        near = _inside(centre, self.low, self.high, self._pad)
        if not near.any():
            return np.zeros(0, dtype=np.int64), np.zeros((0, 3))
        atoms = np.flatnonzero(np.repeat(near, self._count))
        position = self.position[atoms] @ turn + move
        close = self._grid.is_near(position)
        return atoms[close], position[close]

    def _residue_pairs(self, pairs: AtomPairs) -> ResiduePairs:
        n = self.n_residues
        key = (pairs.image * n + self.residue[pairs.first]) * n
        key += self.residue[pairs.second]
        order = np.argsort(key)
        key, distance = key[order], pairs.distance_angstrom[order]
        start = np.flatnonzero(np.diff(key, prepend=-1))
        count = np.diff(start, append=len(key))
        shortest = np.minimum.reduceat(distance, start) if start.size else distance
        at_shortest = np.flatnonzero(distance == np.repeat(shortest, count))
        closest = order[at_shortest[np.searchsorted(at_shortest, start)]]
        rest, second = np.divmod(key[start], n)
        image, first = np.divmod(rest, n)
        return ResiduePairs(
            image=image,
            first=first,
            second=second,
            distance_angstrom=shortest,
            atom_1=self.atom[pairs.first[closest]],
            atom_2=self.atom[pairs.second[closest]],
            n_atom_pairs=count,
        )


class _Grid:
    """Which places lie near the molecule, by cubes of at least the reach."""

    def __init__(self, position: NDArray[np.float64], reach: float) -> None:
        low, high = position.min(axis=0) - 2 * reach, position.max(axis=0) + 2 * reach
        self._edge = max(reach, float(np.prod(high - low) / LARGEST_GRID) ** (1 / 3))
        self._low = low - self._edge
        shape = np.ceil((high - self._low) / self._edge).astype(np.int64) + 2
        near = np.zeros(shape, dtype=np.bool_)
        near[tuple(self._cubes(position).T)] = True
        for axis in range(3):
            near = _grow(near, axis)
        self._near = near

    def _cubes(self, position: NDArray[np.float64]) -> NDArray[np.int64]:
        cubes: NDArray[np.int64] = ((position - self._low) / self._edge).astype(
            np.int64
        )
        return cubes

    def is_near(self, position: NDArray[np.float64]) -> NDArray[np.bool_]:
        cubes = self._cubes(position)
        within = np.all((position >= self._low) & (cubes < self._near.shape), axis=1)
        out = np.zeros(len(position), dtype=np.bool_)
        out[within] = self._near[tuple(cubes[within].T)]
        return out


def _grow(near: NDArray[np.bool_], axis: int) -> NDArray[np.bool_]:
    rolled = np.moveaxis(near, axis, 0)
    grown = rolled.copy()
    grown[1:] |= rolled[:-1]
    grown[:-1] |= rolled[1:]
    return np.moveaxis(grown, 0, axis)


def _inside(
    point: NDArray[np.float64],
    low: NDArray[np.float64],
    high: NDArray[np.float64],
    pad: NDArray[np.float64],
) -> NDArray[np.bool_]:
    return np.asarray(np.all((point >= low - pad) & (point <= high + pad), axis=1))
