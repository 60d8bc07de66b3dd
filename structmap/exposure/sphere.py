"""Points of atom spheres that other atoms leave open.

The method is that of Shrake and Rupley, J. Mol. Biol. 79, 351-371 (1973): the surface
that the centre of a probe can reach is sampled by points on a sphere round each atom.
"""

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only

PROBE_ANGSTROM = 1.4
N_POINTS = 960
# Bondi, J. Phys. Chem. 68, 441-451 (1964), from memory; the most common element that a
# polymer may hold and that is not listed is given the radius of S.
RADIUS_ANGSTROM = {
    "C": 1.70,
    "N": 1.55,
    "O": 1.52,
    "S": 1.80,
    "P": 1.80,
    "SE": 1.90,
    "F": 1.47,
    "CL": 1.75,
    "BR": 1.85,
    "I": 1.98,
}
OTHER_RADIUS_ANGSTROM = 1.80
ATOMS_AT_ONCE = 2000

Progress = Callable[[float], object]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Shades:
    """Neighbours that take points of atoms away, sorted by atom, then by group.

    Attributes
    ----------
    atom : ndarray of int, shape (n,)
        Atom that loses points.
    group : ndarray of int, shape (n,)
        What the neighbour belongs to.
    cap : ndarray of float, shape (n, 4)
        A point s on the unit sphere is taken where ``cap[:3] · s + cap[3] >= 0``.
    """

    atom: NDArray[np.int64]
    group: NDArray[np.int64]
    cap: NDArray[np.float32]

    def __post_init__(self) -> None:
        n = len(self.atom)
        store_read_only(self, "atom", np.int64, (n,))
        store_read_only(self, "group", np.int64, (n,))
        store_read_only(self, "cap", np.float32, (n, 4))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class OpenShare:
    """What neighbours leave of the spheres of atoms.

    Attributes
    ----------
    share : ndarray of float, shape (n_atoms,)
        Share of the points that the first neighbours leave open; NaN for atoms that
        were not asked for.
    atom, group : ndarray of int, shape (n_losses,)
        Atom and group of further neighbours.
    lost : ndarray of float, shape (n_losses,)
        Share of the points that this group takes of those left open.
    """

    share: NDArray[np.float64]
    atom: NDArray[np.int64]
    group: NDArray[np.int64]
    lost: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = len(self.atom)
        store_read_only(self, "share", np.float64, (None,))
        store_read_only(self, "atom", np.int64, (n,))
        store_read_only(self, "group", np.int64, (n,))
        store_read_only(self, "lost", np.float64, (n,))


def sphere_radii(element: NDArray[np.str_]) -> NDArray[np.float64]:
    """Return the distance from each atom at which a probe of water touches it.

    Parameters
    ----------
    element : ndarray of str, shape (n_atoms,)
        Symbols in any case.

    Returns
    -------
    ndarray of float, shape (n_atoms,)
        Van der Waals radius and 1.4 Å of probe, in Å.
    """
    names, which = np.unique(element, return_inverse=True)
    radii = [RADIUS_ANGSTROM.get(str(n).upper(), OTHER_RADIUS_ANGSTROM) for n in names]
    return np.array(radii, dtype=np.float64)[which.reshape(-1)] + PROBE_ANGSTROM


def golden_spiral(n_points: int) -> NDArray[np.float64]:
    """Return points that lie evenly on the unit sphere.

    Parameters
    ----------
    n_points : int
        How many.

    Returns
    -------
    ndarray of float, shape (n_points, 3)
        Turned by the golden angle from one to the next, at even steps of height.
    """
    index = np.arange(n_points)
    height = 1 - (2 * index + 1) / n_points
    angle = index * np.pi * (3 - np.sqrt(5))
    width = np.sqrt(1 - height**2)
    return np.column_stack([width * np.cos(angle), width * np.sin(angle), height])


def make_shades(
    atom: NDArray[np.int64],
    vector: NDArray[np.float64],
    *,
    radius: NDArray[np.float64],
    other_radius: NDArray[np.float64],
    group: NDArray[np.int64],
) -> Shades:
    """Return neighbours as the caps that they cut off the spheres of atoms.

    Parameters
    ----------
    atom : ndarray of int, shape (n,)
        Atoms that lose points.
    vector : ndarray of float, shape (n, 3)
        From the atom to its neighbour, in Å.
    radius, other_radius : ndarray of float, shape (n,)
        Radii of the two spheres, in Å.
    group : ndarray of int, shape (n,)
        What the neighbour belongs to.

    Returns
    -------
    Shades
        Without neighbours too far away to cut.
    """
    squared = np.einsum("ij,ij->i", vector, vector)
    cuts = squared < (radius + other_radius) ** 2
    atom, vector, squared, group = atom[cuts], vector[cuts], squared[cuts], group[cuts]
    radius, other_radius = radius[cuts], other_radius[cuts]
    height = (radius**2 + squared - other_radius**2) / (2 * radius)
    order = np.lexsort((group, atom))
    cap = np.column_stack([vector, -height]).astype(np.float32)
    return Shades(atom=atom[order], group=group[order], cap=cap[order])


def find_open_share(
    first: Shades,
    further: Shades,
    *,
    atoms: NDArray[np.bool_],
    progress: Progress | None = None,
) -> OpenShare:
    """Return the share of each sphere that stays open, and what further groups take.

    Parameters
    ----------
    first : Shades
        Neighbours that are always there.
    further : Shades
        Neighbours that may come, a group at a time.
    atoms : ndarray of bool, shape (n_atoms,)
        Atoms that are asked for.
    progress : callable, optional
        Called with the share done, 0 to 1.

    Returns
    -------
    OpenShare
        The same points are used throughout, so that a group can never add area.
    """
    wanted = np.flatnonzero(atoms)
    points = np.column_stack([golden_spiral(N_POINTS), np.ones(N_POINTS)])
    sphere = np.ascontiguousarray(points.T, dtype=np.float32)
    start = np.flatnonzero(
        (np.diff(further.atom, prepend=-1) != 0)
        | (np.diff(further.group, prepend=-1) != 0)
    )
    spans = list(pairwise([*start.tolist(), len(further.atom)]))
    group_atom = further.atom[start]
    left, lost = np.full(len(atoms), np.nan), np.full(len(start), np.nan)
    own, groups = _spans(first.atom, wanted), _spans(group_atom, wanted)
    for rank, atom in enumerate(wanted.tolist()):
        is_open = _left_open(sphere, first.cap[slice(*own[rank])])
        left[atom] = np.count_nonzero(is_open)
        begin, end = groups[rank]
        points = sphere[:, is_open] if end > begin else sphere
        for group in range(begin, end):
            still_open = _left_open(points, further.cap[slice(*spans[group])])
            lost[group] = left[atom] - np.count_nonzero(still_open)
        if progress is not None and rank % ATOMS_AT_ONCE == 0:
            progress(rank / len(wanted))
    return OpenShare(
        share=left / N_POINTS,
        atom=group_atom,
        group=further.group[start],
        lost=lost / N_POINTS,
    )


def _spans(rising: NDArray[np.int64], wanted: NDArray[np.int64]) -> list[list[int]]:
    """Return where each wanted number begins and ends in a rising list."""
    ends = [np.searchsorted(rising, wanted, side=side) for side in ("left", "right")]
    spans: list[list[int]] = np.column_stack(ends).tolist()
    return spans


def _left_open(
    points: NDArray[np.float32], caps: NDArray[np.float32]
) -> NDArray[np.bool_]:
    """Return which points, shape (4, n), no cap takes."""
    if not len(caps):
        return np.ones(points.shape[1], dtype=np.bool_)
    return np.asarray((caps @ points).max(axis=0) < 0)
