"""Contacts of a crystal the slow way: every image, every pair of atoms.

Shares nothing with the package: the file is read by gemmi alone, operators are gemmi's
own objects, images come from a range of shifts one wider than needed, and distances are
full matrices.
"""

import itertools
from dataclasses import dataclass, field
from pathlib import Path

import gemmi
import numpy as np

Edge = tuple[int, int, str, tuple[int, int, int]]


@dataclass
class Found:
    """Residue edges with shortest distance and number of atom pairs."""

    residues: list[str] = field(default_factory=list)
    edges: dict[Edge, tuple[float, int]] = field(default_factory=dict)
    directed_pairs: int = 0


@dataclass
class Atoms:
    labels: list[str]
    residue: np.ndarray
    position: np.ndarray
    altloc: np.ndarray


def heavy_atoms(model: gemmi.Model, *, polymer: bool = True) -> Atoms:
    labels, residue, position, altloc = [], [], [], []
    for chain in model:
        for item in chain.get_polymer() if polymer else chain:
            label = f"{chain.name}/{item.seqid}"
            for atom in item:
                if atom.is_hydrogen() or atom.occ <= 0:
                    continue
                if label not in labels:
                    labels.append(label)
                residue.append(labels.index(label))
                position.append(atom.pos.tolist())
                altloc.append(atom.altloc if atom.altloc != "\0" else "")
    return Atoms(labels, np.array(residue), np.array(position), np.array(altloc))


def transform(cell: gemmi.UnitCell, points: np.ndarray, which: str) -> np.ndarray:
    part = getattr(cell, which)
    return points @ np.array(part.mat.tolist()).T + np.array(part.vec.tolist())


def wide_shifts(
    cell: gemmi.UnitCell, here: np.ndarray, image: np.ndarray, reach: float
) -> itertools.product:
    """Whole cells that can bring the image near, and one more at either end."""
    spacing = np.linalg.norm(np.array(cell.frac.mat.tolist()), axis=1)
    low = np.floor(here.min(0) - reach * spacing - image.max(0)).astype(int) - 1
    high = np.ceil(here.max(0) + reach * spacing - image.min(0)).astype(int) + 1
    return itertools.product(*(range(a, b + 1) for a, b in zip(low, high, strict=True)))


def count_directed_pairs(path: Path, reach: float) -> int:
    """Ordered pairs of any heavy atoms, in one residue too."""
    structure = gemmi.read_structure(str(path))
    structure.setup_entities()
    operators = list(structure.find_spacegroup().operations())
    atoms = heavy_atoms(structure[0], polymer=False)
    return edges_of(atoms, structure.cell, operators, reach).directed_pairs


def find_edges(path: Path, reach: float) -> Found:
    structure = gemmi.read_structure(str(path))
    structure.setup_entities()
    operators = list(structure.find_spacegroup().operations())
    return edges_of(heavy_atoms(structure[0]), structure.cell, operators, reach)


def edges_of(
    atoms: Atoms, cell: gemmi.UnitCell, operators: list[gemmi.Op], reach: float
) -> Found:
    agree = (
        (atoms.altloc[:, None] == atoms.altloc[None])
        | (atoms.altloc == "")[:, None]
        | (atoms.altloc == "")[None]
    )
    found = Found(residues=atoms.labels)
    directed: dict[Edge, tuple[float, int, int]] = {}
    fractional = transform(cell, atoms.position, "frac")
    for operator in operators:
        turn = np.array(operator.rot) / operator.DEN
        image = fractional @ turn.T + np.array(operator.tran) / operator.DEN
        shifts = np.array(list(wide_shifts(cell, fractional, image, reach)))
        moves = shifts @ np.array(cell.orth.mat.tolist()).T
        there = transform(cell, image, "orth")
        gap = np.maximum(
            there.min(0) + moves - atoms.position.max(0),
            atoms.position.min(0) - there.max(0) - moves,
        ).max(axis=1)
        for k in np.flatnonzero(gap <= reach + 1e-6):  # boxes further apart are idle
            name = operator.triplet(), tuple(shifts[k].tolist())
            _add(directed, found, (atoms, there + moves[k], agree, reach), name)
    for edge, (shortest, count, n_same) in directed.items():
        mirrored = inverse(edge)
        assert mirrored in directed, "a contact must be seen from both sides"
        # where the element undoes itself, every pair of two atoms was seen twice
        once = (count + n_same) // 2 if mirrored == edge else count
        found.edges[min(edge, mirrored, key=sorting(operators))] = shortest, once
    return found


def _add(directed: dict, found: Found, data: tuple, name: tuple) -> None:
    atoms, there, agree, reach = data
    apart = np.linalg.norm(atoms.position[:, None] - there[None], axis=2)
    identity = name == ("x,y,z", (0, 0, 0))
    close = (apart <= reach) & agree
    if identity:
        np.fill_diagonal(close, val=False)
    found.directed_pairs += int(close.sum())
    if not identity:
        on_element = np.diagonal(apart) < 0.8
        np.fill_diagonal(close, np.diagonal(close) & ~on_element)
        for residue in np.unique(atoms.residue[on_element]):
            own = atoms.residue == residue
            if on_element[own].mean() > 0.5:  # the residue is its own image
                close[np.ix_(own, own)] = False
    first, second = np.nonzero(close)
    for i, j in zip(first, second, strict=True):
        a, b = int(atoms.residue[i]), int(atoms.residue[j])
        if identity and a == b:
            continue
        edge = (a, b, *name)
        shortest, count, n_same = directed.get(edge, (np.inf, 0, 0))
        shortest = min(shortest, float(apart[i, j]))
        directed[edge] = shortest, count + 1, n_same + int(i == j)


def inverse(edge: Edge) -> Edge:
    """The same contact seen from its other end, with gemmi's own inverse."""
    a, b, triplet, shift = edge
    shifted = gemmi.Op(triplet)
    shifted.tran = [
        t + n * gemmi.Op.DEN for t, n in zip(shifted.tran, shift, strict=True)
    ]
    back = shifted.inverse()
    wrapped = shifted.inverse().wrap()
    cells = [
        (t - w) // gemmi.Op.DEN for t, w in zip(back.tran, wrapped.tran, strict=True)
    ]
    return b, a, wrapped.triplet(), tuple(cells)


def sorting(operators: list[gemmi.Op]):
    rank = {operator.triplet(): index for index, operator in enumerate(operators)}
    return lambda edge: (edge[0], edge[1], rank[edge[2]], edge[3])
