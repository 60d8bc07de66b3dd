"""Which group a set of symmetry elements generates: finite, or endless and how far."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only

TWENTY_FOURTHS = 24
WORDS = ("rod", "layer", "net")
LARGEST_POINT_GROUP = 120
FIXED_POINT_ANGSTROM = 1.0
SAME_TRANSFORM = 0.05


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Closure:
    """The group that maps something built of images onto itself.

    Attributes
    ----------
    closes : str
        ``finite`` when it is the identity alone, ``ring`` when it is another finite
        group, ``rod``, ``layer`` or ``net`` when it holds translations in one, two or
        three directions.
    order : int
        Number of rotation parts: the number of images that close a ring. 0 when a
        Cartesian group has too many to count.
    rank : int
        Number of independent translations, 0 to 3.
    periods : ndarray of float, shape (n_periods, 3)
        Basis of the translations in cell edges, short vectors; empty for a group that
        no crystal makes.
    """

    closes: str
    order: int
    rank: int
    periods: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "periods", np.float64, (None, 3))


def close_group(
    rotations: NDArray[np.int64],
    translations: NDArray[np.int64],
    *,
    orthogonalisation: NDArray[np.float64],
) -> Closure:
    """Return the group that crystal symmetry elements generate.

    Parameters
    ----------
    rotations : ndarray of int, shape (n, 3, 3)
        Rotation parts on fractional coordinates.
    translations : ndarray of int, shape (n, 3)
        Translation parts in 24ths of a cell edge, whole shifts included.
    orthogonalisation : ndarray, shape (3, 3)
        From cell edges to Å, to choose short periods.

    Returns
    -------
    Closure
        What they generate together.

    Notes
    -----
    The rotation parts are closed first, with one representative each; Schreier's lemma
    [1]_ then gives generators of the translations, whose Hermite normal form is their
    basis. All of it is integer arithmetic.

    References
    ----------
    .. [1] Holt, Eick and O'Brien, Handbook of Computational Group Theory, section
       2.5.1 (2005; cited from memory).
    """
    generators = list(zip(rotations, translations, strict=True))
    identity = (np.eye(3, dtype=np.int64), np.zeros(3, dtype=np.int64))
    representative = {identity[0].tobytes(): identity}
    queue, moves = [identity], []
    for rotation, translation in queue:  # grows while it is walked
        for turn, shift in generators:
            product = rotation @ turn, rotation @ shift + translation
            key = product[0].tobytes()
            if key in representative:
                moves.append(product[1] - representative[key][1])
            else:
                representative[key] = product
                queue.append(product)
    basis = hermite_basis(np.array(moves, dtype=np.int64).reshape(-1, 3))
    order, rank = len(representative), len(basis)
    periods = shorten_basis(basis, orthogonalisation) / TWENTY_FOURTHS
    return Closure(
        closes=closing_word(order, rank), order=order, rank=rank, periods=periods
    )


def closing_word(order: int, rank: int) -> str:
    """Return the word for a group.

    Parameters
    ----------
    order : int
        Number of rotation parts.
    rank : int
        Number of independent translations.

    Returns
    -------
    str
        ``finite``, ``ring``, ``rod``, ``layer`` or ``net``.
    """
    if rank:
        return WORDS[rank - 1]
    return "finite" if order == 1 else "ring"


def hermite_basis(vectors: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the basis of the lattice that integer vectors span.

    Parameters
    ----------
    vectors : ndarray of int, shape (n, 3)
        In any number, dependent or not.

    Returns
    -------
    ndarray of int, shape (rank, 3)
        Hermite normal form by rows: pivots above 0, entries above a pivot from 0 to
        the pivot less 1. Two sets span the same lattice exactly when these are equal.
    """
    rows = [[int(entry) for entry in row] for row in vectors if row.any()]
    basis: list[list[int]] = []
    for column in range(3):
        pivot, rows = _eliminate(rows, column)
        if pivot:
            basis = [_reduced(row, pivot, column) for row in basis]
            basis.append(pivot)
    return np.array(basis, dtype=np.int64).reshape(-1, 3)


def _eliminate(rows: list[list[int]], column: int) -> tuple[list[int], list[list[int]]]:
    """Return the pivot row of a column and the rows with a 0 there (Euclid)."""
    active = [row for row in rows if row[column]]
    rest = [row for row in rows if not row[column]]
    while len(active) > 1:
        active.sort(key=lambda row: abs(row[column]))
        pivot = active[0]
        changed = [_reduced(row, pivot, column) for row in active[1:]]
        rest += [row for row in changed if not row[column] and any(row)]
        active = [pivot, *(row for row in changed if row[column])]
    if not active:
        return [], rest
    sign = 1 if active[0][column] > 0 else -1
    return [sign * entry for entry in active[0]], rest


def _reduced(row: Sequence[int], pivot: Sequence[int], column: int) -> list[int]:
    factor = row[column] // pivot[column]
    return [entry - factor * other for entry, other in zip(row, pivot, strict=True)]


def shorten_basis(
    basis: NDArray[np.int64], orthogonalisation: NDArray[np.float64]
) -> NDArray[np.int64]:
    """Return a basis of the same lattice with short vectors.

    Parameters
    ----------
    basis : ndarray of int, shape (rank, 3)
        Independent vectors in fractions of cell edges.
    orthogonalisation : ndarray, shape (3, 3)
        From cell edges to Å.

    Returns
    -------
    ndarray of int, shape (rank, 3)
        Shortest first; no vector gets shorter by adding whole multiples of another.
        The first entry other than 0 of each is above 0.
    """
    metric = orthogonalisation.T @ orthogonalisation
    basis, changed = basis.copy(), True
    while changed:
        changed = False
        for i in range(len(basis)):
            for j in range(len(basis)):
                overlap = basis[i] @ metric @ basis[j] / (basis[j] @ metric @ basis[j])
                if i != j and abs(overlap) > 0.5 + 1e-9:
                    basis[i] -= round(overlap) * basis[j]
                    changed = True
    signs = [np.sign(row[np.flatnonzero(row)[0]]) for row in basis]
    basis *= np.array(signs, dtype=np.int64).reshape(-1, 1)
    length = np.einsum("ij,jk,ik->i", basis, metric, basis)
    return basis[np.lexsort((*basis.T, np.round(length, 6)))]


# --- groups that no crystal makes -----------------------------------------------------


def close_transforms(
    transforms: NDArray[np.float64], *, centre: NDArray[np.float64]
) -> Closure:
    """Return the group that Cartesian transforms generate.

    Parameters
    ----------
    transforms : ndarray of float, shape (n, 4, 4)
        Rotations and translations in Å, from an assembly.
    centre : ndarray, shape (3,)
        Middle of the molecule in Å.

    Returns
    -------
    Closure
        Without periods: the turns of a helix need not add up to a translation.

    Notes
    -----
    A group of motions is finite exactly when it leaves a point where it is. The
    dimension of an endless one is the number of principal axes along which the images
    of the molecule keep spreading from the nearest 60 to the nearest 480 elements.
    """
    if not len(transforms):
        return _cartesian(1, 0)
    left = transforms[:, :3, :3] - np.eye(3)
    right = -transforms[:, :3, 3]
    fixed = np.linalg.lstsq(left.reshape(-1, 3), right.reshape(-1), rcond=1e-4)[0]
    misfit = np.linalg.norm(left @ fixed - right, axis=1).max()
    if misfit < FIXED_POINT_ANGSTROM:
        rotations = transforms.copy()
        rotations[:, :3, 3] = 0
        return _cartesian(_order(rotations), 0)
    return _cartesian(0, _spreading(transforms, centre))


def _cartesian(order: int, rank: int) -> Closure:
    word = closing_word(order, rank)
    return Closure(closes=word, order=order, rank=rank, periods=np.zeros((0, 3)))


def _order(rotations: NDArray[np.float64]) -> int:
    found = _words(rotations, LARGEST_POINT_GROUP + 1)
    return len(found) if len(found) <= LARGEST_POINT_GROUP else 0


def _words(transforms: NDArray[np.float64], most: int) -> NDArray[np.float64]:
    """Return the elements made of the fewest generators, at most so many."""
    steps = np.concatenate([transforms, np.linalg.inv(transforms)])
    scale = np.ones((4, 4))
    scale[:3, 3] = SAME_TRANSFORM  # 1 Å counts as a twentieth of a rotation entry
    found = [np.eye(4)]
    for element in found:  # grows while it is walked
        for candidate in element @ steps:
            apart = np.abs((np.array(found) - candidate) * scale).max(axis=(1, 2))
            if apart.min() > SAME_TRANSFORM and len(found) < most:
                found.append(candidate)
    return np.array(found)


def _spreading(transforms: NDArray[np.float64], centre: NDArray[np.float64]) -> int:
    found = _words(transforms, 480)
    places = found[:, :3, :3] @ centre + found[:, :3, 3]
    axes = np.linalg.svd(places - places.mean(axis=0), full_matrices=False)[2]
    along = (places - places.mean(axis=0)) @ axes.T
    near, far = along[:60].std(axis=0), along.std(axis=0)
    return max(1, int((far > 1.5 * near + FIXED_POINT_ANGSTROM).sum()))
