"""Mates that only an assembly makes, without a crystal operator for them."""

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from structmap.contacts.assemblies import (
    SAME_PLACE_ANGSTROM,
    Element,
    Frame,
    corners_of,
)
from structmap.contacts.group import element_matrix
from structmap.structure import Structure


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Mate:
    """A transform between two members of an assembly.

    Attributes
    ----------
    matrix : ndarray, shape (4, 4)
        Cartesian transform that brings the file's molecule to the second member when
        the first stands as in the file.
    label, inverse_label : str
        ``assembly id:operator number``; ``assembly id:p/q`` is what operator p makes,
        seen from what operator q makes.
    allowed : ndarray of bool, shape (n_copies, n_copies)
        Which chain copies are the first and which the second member.
    self_inverse : bool
        Whether the transform undoes itself.
    """

    matrix: NDArray[np.float64]
    label: str
    inverse_label: str
    allowed: NDArray[np.bool_]
    self_inverse: bool


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Placement:
    frame: int
    number: int
    matrix: NDArray[np.float64]
    copies: NDArray[np.bool_]


def mates_of_assemblies(
    structure: Structure, frames: Sequence[Frame], *, reach_angstrom: float
) -> list[Mate]:
    """Return the transforms between members that no crystal operator makes.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    frames : sequence of Frame
        Members of the assemblies.
    reach_angstrom : float
        Mates that cannot come this close are left out.

    Returns
    -------
    list of Mate
        Each transform once; its inverse is not listed beside it.
    """
    mates: list[Mate] = []
    for assembly, group in itertools.groupby(frames, key=lambda frame: frame.assembly):
        own = list(group)
        if len(own) > 1:
            placements = _placements(structure, own)
            mates.extend(_mates(structure, assembly, placements, reach_angstrom))
    return _without_repeats(structure, mates)


def _placements(structure: Structure, frames: Sequence[Frame]) -> list[_Placement]:
    out = []
    for index, frame in enumerate(frames):
        elements: dict[Element, list[tuple[int, int, int]]] = {}
        for copy, members in frame.members.items():
            ncs = structure.chain_copies[copy].ncs
            for element, number in members.items():
                elements.setdefault(element, []).append((ncs, number, copy))
        for element, entries in sorted(elements.items()):
            copies = np.zeros(len(structure.chain_copies), dtype=np.bool_)
            copies[[copy for _, _, copy in entries]] = True
            matrix = frame.base @ _matrix_of(structure, element)
            number = min(entries)[1]
            out.append(
                _Placement(frame=index, number=number, matrix=matrix, copies=copies)
            )
    return out


def _matrix_of(structure: Structure, element: Element) -> NDArray[np.float64]:
    if structure.crystal is None:
        return np.eye(4)
    return element_matrix(structure.crystal, element[0], np.array(element[1:]))


def _mates(
    structure: Structure, assembly: str, placements: list[_Placement], reach: float
) -> list[Mate]:
    pairs = [
        (first, second)
        for first, second in itertools.permutations(placements, 2)
        if first.frame != second.frame
    ]
    inverses = {id(item): np.linalg.inv(item.matrix) for item in placements}
    matrices = np.array([inverses[id(one)] @ two.matrix for one, two in pairs])
    near = _may_touch(structure, matrices, reach)
    pairs = [pair for pair, is_near in zip(pairs, near, strict=True) if is_near]
    matrices = matrices[near]
    return [
        _mate(assembly, [pairs[row] for row in rows], matrices[rows[0]], structure)
        for rows in _groups(_landmarks(structure, matrices))
    ]


def _may_touch(
    structure: Structure, matrices: NDArray[np.float64], reach: float
) -> NDArray[np.bool_]:
    corners = corners_of(structure)
    centre = corners.mean(axis=0)
    radius = np.linalg.norm(corners - centre, axis=1).max()
    moved = matrices @ centre - centre
    return np.asarray(np.linalg.norm(moved, axis=1) <= 2 * radius + reach)


def _landmarks(
    structure: Structure, matrices: NDArray[np.float64]
) -> NDArray[np.float64]:
    places = np.einsum("mij,cj->mci", matrices, corners_of(structure))[..., :3]
    return np.asarray(places.reshape(len(matrices), 3 * places.shape[1]))


def _groups(places: NDArray[np.float64]) -> list[list[int]]:
    if not len(places):
        return []
    pairs = cKDTree(places).query_pairs(SAME_PLACE_ANGSTROM, output_type="ndarray")
    net = coo_array(
        (np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=[len(places)] * 2
    )
    label = connected_components(net, directed=False)[1]
    groups: dict[int, list[int]] = {}
    for row, group in enumerate(label):
        groups.setdefault(int(group), []).append(row)
    return list(groups.values())


def _mate(
    assembly: str,
    pairs: list[tuple[_Placement, _Placement]],
    matrix: NDArray[np.float64],
    structure: Structure,
) -> Mate:
    allowed = np.zeros([len(structure.chain_copies)] * 2, dtype=np.bool_)
    for first, second in pairs:
        allowed |= np.outer(first.copies, second.copies)
    back = [(second, first) for first, second in pairs]
    here, there = _landmarks(structure, np.array([matrix, np.linalg.inv(matrix)]))
    return Mate(
        matrix=matrix,
        label=_label(assembly, pairs),
        inverse_label=_label(assembly, back),
        allowed=allowed,
        self_inverse=bool(np.linalg.norm(here - there) < SAME_PLACE_ANGSTROM),
    )


def _label(assembly: str, pairs: list[tuple[_Placement, _Placement]]) -> str:
    seen_from_file = [
        second.number for first, second in pairs if np.allclose(first.matrix, np.eye(4))
    ]
    if seen_from_file:
        return f"{assembly}:{min(seen_from_file) + 1}"
    first, second = min(pairs, key=lambda pair: (pair[1].number, pair[0].number))
    return f"{assembly}:{second.number + 1}/{first.number + 1}"


def _without_repeats(structure: Structure, mates: list[Mate]) -> list[Mate]:
    """Keep one of each transform and its inverse, over all assemblies."""
    if not mates:
        return []
    both = np.array([[mate.matrix, np.linalg.inv(mate.matrix)] for mate in mates])
    groups = _groups(_landmarks(structure, both.reshape(-1, 4, 4)))
    kept: list[Mate] = []
    done: set[int] = set()
    for rows in groups:  # row 2 i is mate i, row 2 i + 1 its inverse
        if rows[0] in done:
            continue
        done.update(rows, (row ^ 1 for row in rows))
        allowed = [
            mates[row // 2].allowed if row % 2 == 0 else mates[row // 2].allowed.T
            for row in rows
        ]
        first = mates[rows[0] // 2]
        kept.append(replace(first, allowed=np.logical_or.reduce(allowed)))
    return kept
