"""Biological assemblies: which are used, and which images belong to them."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from structmap.contacts.group import (
    TWENTY_FOURTHS,
    element_matrix,
    fractionalising,
    orthogonalising,
)
from structmap.errors import UnknownAssemblyError
from structmap.structure import Assembly, Structure

ROTATION_TOLERANCE = 0.05
SAME_PLACE_ANGSTROM = 1.0

Element = tuple[int, int, int, int]
IDENTITY: Element = (0, 0, 0, 0)
Waiting = tuple[int, tuple[int, ...]]
"""Number of an operator and the copies of one chain that it moves."""


def choose_assemblies(structure: Structure, choice: str) -> tuple[Assembly, ...]:
    """Return the assemblies that make contacts `complex`.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    choice : str
        ``auto`` takes those that the authors determined, else those that software
        did, else all that are listed; ``none`` takes none; otherwise ids parted by
        commas.

    Returns
    -------
    tuple of Assembly
        The assemblies.

    Raises
    ------
    UnknownAssemblyError
        If the file lists no assembly of that id.
    """
    listed = structure.assemblies
    if choice == "auto":
        by_author = tuple(item for item in listed if item.by_author)
        by_software = tuple(item for item in listed if item.by_software)
        return by_author or by_software or listed
    if choice == "none":
        return ()
    by_name = {item.name: item for item in listed}
    chosen = []
    for name in dict.fromkeys(part.strip() for part in choice.split(",")):
        if name not in by_name:
            raise UnknownAssemblyError(structure.name, name, ", ".join(by_name))
        chosen.append(by_name[name])
    return tuple(chosen)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Frame:
    """Members of an assembly that crystal operators relate to each other.

    Attributes
    ----------
    assembly : str
        Its id.
    base : ndarray, shape (4, 4)
        Cartesian transform that the members stand behind; the identity where crystal
        operators make them from the file's molecule.
    members : dict
        For a chain copy, its elements (operator, shift) and the number of the
        assembly's operator that stands for each.
    """

    assembly: str
    base: NDArray[np.float64]
    members: dict[int, dict[Element, int]] = field(default_factory=dict)


def assembly_frames(
    structure: Structure, assemblies: Sequence[Assembly]
) -> tuple[Frame, ...]:
    """Return the members of assemblies as images of the file's molecule.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    assemblies : sequence of Assembly
        Biological assemblies.

    Returns
    -------
    tuple of Frame
        One for each assembly where the crystal makes it, more where it does not.

    Notes
    -----
    An operator T of an assembly is sought among the elements g of the crystal, and
    where strict NCS operators N made copies, as g N = T: then the member is the copy.
    """
    frames: list[Frame] = []
    matcher = _Matcher(structure)
    for assembly in assemblies:
        waiting = [
            (number, copies)
            for number, chains in enumerate(assembly.chains)
            for copies in matcher.copies_of(chains)
        ]
        base = np.eye(4)
        while True:
            frame = Frame(assembly=assembly.name, base=base)
            frames.append(frame)
            waiting = [
                item for item in waiting if not _enter(matcher, frame, item, assembly)
            ]
            if not waiting:
                break
            base = assembly.matrices[waiting[0][0]]
    return tuple(frames)


def _enter(
    matcher: "_Matcher", frame: Frame, member: Waiting, assembly: Assembly
) -> bool:
    """Make an operator a member of a frame if it can be one."""
    number, copies = member
    relative = np.linalg.inv(frame.base) @ assembly.matrices[number]
    found = matcher.find(relative, copies)
    if found is not None:
        copy, element = found
        frame.members.setdefault(copy, {}).setdefault(element, number)
    return found is not None


def corners_of(structure: Structure) -> NDArray[np.float64]:
    """Return the corners of the box around the file's atoms.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    ndarray of float, shape (8, 4)
        Cartesian, with a 1 behind for transforms.
    """
    ends = np.array([structure.position.min(axis=0), structure.position.max(axis=0)])
    corners = np.stack(np.meshgrid(*ends.T, indexing="ij"), axis=-1).reshape(-1, 3)
    return np.column_stack([corners, np.ones(len(corners))])


class _Matcher:
    """Finds the crystal element that an assembly's transform is."""

    def __init__(self, structure: Structure) -> None:
        self._structure = structure
        self._corners = corners_of(structure)

    def copies_of(self, chains: Sequence[str]) -> list[tuple[int, ...]]:
        """Return for each named polymer chain its copies, the original first."""
        copies: dict[tuple[str, str], list[int]] = {}
        for index, chain in enumerate(self._structure.chain_copies):
            if chain.auth_asym_id in chains:
                name = chain.auth_asym_id, chain.label_asym_id
                copies.setdefault(name, []).append(index)
        return [tuple(indices) for indices in copies.values()]

    def find(
        self, matrix: NDArray[np.float64], copies: Sequence[int]
    ) -> tuple[int, Element] | None:
        """Return the copy and element that together do what the matrix does."""
        for copy in copies:
            ncs = self._structure.chain_copies[copy].ncs_matrix
            element = self._element(matrix @ np.linalg.inv(ncs))
            if element is not None:
                return copy, element
        return None

    def _element(self, matrix: NDArray[np.float64]) -> Element | None:
        crystal = self._structure.crystal
        if crystal is None:
            return IDENTITY if self._same_place(matrix, np.eye(4)) else None
        inner = fractionalising(crystal) @ matrix @ orthogonalising(crystal)
        off = np.abs(crystal.rotations - inner[:3, :3]).max(axis=(1, 2))
        for operator in np.flatnonzero(off < ROTATION_TOLERANCE):
            translation = crystal.translations[operator] / TWENTY_FOURTHS
            shift = np.rint(inner[:3, 3] - translation).astype(np.int64)
            image = element_matrix(crystal, int(operator), shift)
            if self._same_place(matrix, image):
                return int(operator), int(shift[0]), int(shift[1]), int(shift[2])
        return None

    def _same_place(
        self, left: NDArray[np.float64], right: NDArray[np.float64]
    ) -> bool:
        apart = self._corners @ (left - right)[:3].T
        return bool(np.linalg.norm(apart, axis=1).max() < SAME_PLACE_ANGSTROM)
