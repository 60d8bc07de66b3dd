"""Which images of a crystal can touch the molecule at all."""

import numpy as np
from numpy.typing import NDArray

from structmap.contacts.group import TWENTY_FOURTHS, GroupTable
from structmap.errors import CrowdedCellError
from structmap.structure import LIGAND_PART, POLYMER, Crystal, Structure

MOST_IMAGES = 1_000_000


def candidate_images(
    structure: Structure, crystal: Crystal, table: GroupTable, *, reach_angstrom: float
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return every image that may come within reach, one of each inverse pair.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    crystal : Crystal
        Cell and operators.
    table : GroupTable
        Products and inverses of the operators.
    reach_angstrom : float
        Largest distance between heavy atoms.

    Returns
    -------
    operator : ndarray of int, shape (n_images,)
        Operators.
    shift : ndarray of int, shape (n_images, 3)
        Sorted; of an element and its inverse the lexicographically smaller one; the
        identity is not among them.

    Raises
    ------
    CrowdedCellError
        If there are more than a million.

    Notes
    -----
    Boxes in fractional coordinates: the shift along an axis runs from
    ceil(low - pad - high') to floor(high + pad - low'), with the box of the molecule,
    the box of its turned image and pad = reach times the length of the reciprocal
    axis. This is complete for any cell and wherever the molecule lies; a fixed range
    of -1 to 1 is not.
    """
    kind = structure.kind_of_residue[structure.residue_of_atom]
    touching = np.isin(kind, (POLYMER, LIGAND_PART))
    fractional = (
        structure.position[touching] @ crystal.fractionalisation.T
        + crystal.fractionalisation_shift
    )
    low, high = fractional.min(axis=0), fractional.max(axis=0)
    pad = reach_angstrom * np.linalg.norm(crystal.fractionalisation, axis=1)
    image_low, image_high = _turned_boxes(crystal, low, high)
    first = np.ceil(low - pad - image_high - 1e-9).astype(np.int64)
    last = np.floor(high + pad - image_low + 1e-9).astype(np.int64)
    n_images = int(np.prod(np.maximum(last - first + 1, 0).astype(float), axis=1).sum())
    if n_images > MOST_IMAGES:
        raise CrowdedCellError(structure.name, n_images)
    shifts = [_all_shifts(*ends) for ends in zip(first, last, strict=True)]
    operator = np.repeat(np.arange(len(shifts)), [len(block) for block in shifts])
    return _one_of_each_pair(table, operator, np.concatenate(shifts))


def _turned_boxes(
    crystal: Crystal, low: NDArray[np.float64], high: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    ends = crystal.rotations * low, crystal.rotations * high
    moved = crystal.translations / TWENTY_FOURTHS
    return (
        np.minimum(*ends).sum(axis=2) + moved,
        np.maximum(*ends).sum(axis=2) + moved,
    )


def _all_shifts(first: NDArray[np.int64], last: NDArray[np.int64]) -> NDArray[np.int64]:
    axes = [np.arange(low, high + 1) for low, high in zip(first, last, strict=True)]
    return np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)


def _one_of_each_pair(
    table: GroupTable, operator: NDArray[np.int64], shift: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    inverse, inverse_shift = table.inverse(operator, shift)
    here = np.column_stack([operator, shift])
    there = np.column_stack([inverse, inverse_shift])
    identity = ~here.any(axis=1)
    keep = ~identity & ~comes_before(there, here)
    return operator[keep], shift[keep]


def comes_before(
    left: NDArray[np.int64], right: NDArray[np.int64]
) -> NDArray[np.bool_]:
    """Compare rows in lexicographic order.

    Parameters
    ----------
    left, right : ndarray of int, shape (n, m)
        Rows to compare.

    Returns
    -------
    ndarray of bool, shape (n,)
        Whether the left row is smaller.
    """
    differ = left != right
    place = np.argmax(differ, axis=1)
    row = np.arange(len(left))
    return np.asarray(left[row, place] < right[row, place])
