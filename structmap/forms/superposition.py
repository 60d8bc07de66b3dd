"""Superposing two forms on a rigid core that is found by itself."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only

TOLERANCE_ANGSTROM = 2.0
SMALLEST_BODY = 15
SEED_RESIDUES = 20
SEED_STEP = 5
MOST_ROUNDS = 50


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class RigidBody:
    """Residues that keep their places to each other in two forms.

    Attributes
    ----------
    members : ndarray of int, shape (n_members,)
        Rows of the positions given.
    transform : ndarray of float, shape (4, 4)
        Moves the second form so that these residues lie on those of the first.
    rms_angstrom : float
        What is left between them.
    """

    members: NDArray[np.int64]
    transform: NDArray[np.float64]
    rms_angstrom: float

    def __post_init__(self) -> None:
        store_read_only(self, "members", np.int64, (None,))
        store_read_only(self, "transform", np.float64, (4, 4))


def superpose(
    first: NDArray[np.float64], second: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the motion that lays points on others with the least squares.

    Parameters
    ----------
    first, second : ndarray of float, shape (n, 3)
        Points in the same order, in Å.

    Returns
    -------
    ndarray of float, shape (4, 4)
        A rotation and translation for the second; never a mirror image.

    Notes
    -----
    After Kabsch [1]_, by singular values.

    References
    ----------
    .. [1] Kabsch, Acta Cryst. A34, 827 (1978; cited from memory).
    """
    middle, other = first.mean(axis=0), second.mean(axis=0)
    left, _, right = np.linalg.svd((second - other).T @ (first - middle))
    sign = np.sign(np.linalg.det(left @ right))
    rotation = (left * [1.0, 1.0, sign]) @ right
    transform = np.eye(4)
    transform[:3, :3] = rotation.T
    transform[:3, 3] = middle - rotation.T @ other
    return transform


def find_rigid_bodies(
    first: NDArray[np.float64],
    second: NDArray[np.float64],
    *,
    tolerance_angstrom: float = TOLERANCE_ANGSTROM,
    smallest: int = SMALLEST_BODY,
) -> tuple[RigidBody, ...]:
    """Find the parts that are rigid between two forms, the largest first.

    Parameters
    ----------
    first, second : ndarray of float, shape (n_residues, 3)
        One atom a residue in both forms, in the order of the chain, in Å.
    tolerance_angstrom : float, default 2
        Residues of a body lie within this of each other when it is superposed.
    smallest : int, default 15
        Residues that a body must have.

    Returns
    -------
    tuple of RigidBody
        The first one is the core. Empty when no part is rigid.

    Raises
    ------
    ValueError
        If the two have different shapes.

    Notes
    -----
    Superposing on everything smears the motion of a domain over the whole molecule.
    Instead each window of 20 residues, every 5, is superposed; residues that come
    within the tolerance are superposed anew, until they stay the same. The largest set
    wins and is taken away, then the rest is searched again.
    """
    if first.shape != second.shape:
        raise ValueError(f"positions have shapes {first.shape} and {second.shape}")
    left = np.arange(len(first))
    bodies: list[RigidBody] = []
    while len(left) >= smallest:
        found = _largest_body(first[left], second[left], tolerance_angstrom)
        if len(found) < smallest:
            break
        members = left[found]
        transform = superpose(first[members], second[members])
        gap = first[members] - _moved(second[members], transform)
        bodies.append(
            RigidBody(
                members=members,
                transform=transform,
                rms_angstrom=float(np.sqrt((gap**2).sum(axis=1).mean())),
            )
        )
        left = np.delete(left, found)
    return tuple(bodies)


def _largest_body(
    first: NDArray[np.float64], second: NDArray[np.float64], tolerance: float
) -> NDArray[np.int64]:
    best = np.zeros(0, dtype=np.int64)
    last = max(len(first) - SEED_RESIDUES, 0)
    for start in [*range(0, last, SEED_STEP), last]:
        seed = np.arange(start, min(start + SEED_RESIDUES, len(first)))
        grown = _grown(first, second, seed, tolerance)
        if len(grown) > len(best):
            best = grown
    return best


def _grown(
    first: NDArray[np.float64],
    second: NDArray[np.float64],
    members: NDArray[np.int64],
    tolerance: float,
) -> NDArray[np.int64]:
    for _ in range(MOST_ROUNDS):
        transform = superpose(first[members], second[members])
        gap = np.linalg.norm(first - _moved(second, transform), axis=1)
        near = np.flatnonzero(gap <= tolerance)
        if len(near) < 3 or np.array_equal(near, members):
            return near
        members = near
    return members


def _moved(
    points: NDArray[np.float64], transform: NDArray[np.float64]
) -> NDArray[np.float64]:
    return points @ transform[:3, :3].T + transform[:3, 3]
