"""Exact arithmetic with the operators of a space group and whole cell shifts."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only
from structmap.structure import Crystal

TWENTY_FOURTHS = 24


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class GroupTable:
    """Products and inverses of operators, made once for a crystal.

    An element (k, n) is operator k followed by the whole cell shift n. Everything is
    integer arithmetic, translations in 24ths of a cell edge.

    Attributes
    ----------
    rotations : ndarray of int, shape (n_operators, 3, 3)
    product_operator : ndarray of int, shape (n_operators, n_operators)
        Operator of the product of two operators, the right one applied first.
    product_offset : ndarray of int, shape (n_operators, n_operators, 3)
        Whole cells by which that product differs from the listed operator.
    inverse_operator : ndarray of int, shape (n_operators,)
    inverse_offset : ndarray of int, shape (n_operators, 3)
    """

    rotations: NDArray[np.int64]
    product_operator: NDArray[np.int64]
    product_offset: NDArray[np.int64]
    inverse_operator: NDArray[np.int64]
    inverse_offset: NDArray[np.int64]

    def __post_init__(self) -> None:
        n = len(self.rotations)
        store_read_only(self, "rotations", np.int64, (n, 3, 3))
        store_read_only(self, "product_operator", np.int64, (n, n))
        store_read_only(self, "product_offset", np.int64, (n, n, 3))
        store_read_only(self, "inverse_operator", np.int64, (n,))
        store_read_only(self, "inverse_offset", np.int64, (n, 3))

    def product(
        self,
        first: tuple[NDArray[np.int64], NDArray[np.int64]],
        second: tuple[NDArray[np.int64], NDArray[np.int64]],
    ) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Return first · second, the second applied first.

        Parameters
        ----------
        first, second : tuple of ndarray of int, shapes (n,) and (n, 3)
            Operators and shifts.

        Returns
        -------
        operator : ndarray of int, shape (n,)
            Operators.
        shift : ndarray of int, shape (n, 3)
            Whole cell shifts.
        """
        (k, n), (other_k, other_n) = first, second
        turned = np.einsum("...ij,...j->...i", self.rotations[k], other_n)
        return self.product_operator[k, other_k], (
            n + turned + self.product_offset[k, other_k]
        )

    def inverse(
        self, operator: NDArray[np.int64], shift: NDArray[np.int64]
    ) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Return the inverse elements.

        Parameters
        ----------
        operator : ndarray of int, shape (n,)
            Operators.
        shift : ndarray of int, shape (n, 3)
            Whole cell shifts.

        Returns
        -------
        operator : ndarray of int, shape (n,)
            Operators.
        shift : ndarray of int, shape (n, 3)
            Whole cell shifts.
        """
        inverse = self.inverse_operator[operator]
        turned = np.einsum("...ij,...j->...i", self.rotations[inverse], shift)
        return inverse, self.inverse_offset[operator] - turned


def make_group_table(crystal: Crystal) -> GroupTable:
    """Return the products and inverses of the operators of a crystal.

    Parameters
    ----------
    crystal : Crystal
        Cell and operators.

    Returns
    -------
    GroupTable
        Products and inverses of the operators.

    Raises
    ------
    ValueError
        If the operators do not form a group.
    """
    rotations, translations = crystal.rotations, crystal.translations
    n_operators = len(rotations)
    turns = np.einsum("aij,bjk->abik", rotations, rotations)
    moves = np.einsum("aij,bj->abi", rotations, translations) + translations[:, None]
    place = {
        _key(rotation, translation): index
        for index, (rotation, translation) in enumerate(
            zip(rotations, translations, strict=True)
        )
    }
    product = np.array(
        [
            [place.get(_key(turns[a, b], moves[a, b]), -1) for b in range(n_operators)]
            for a in range(n_operators)
        ]
    )
    if (product < 0).any() or not (product == 0).any(axis=1).all():
        raise ValueError("operators do not form a group; give all, the identity first")
    offset = (moves - translations[product]) // TWENTY_FOURTHS
    inverse = np.argmax(product == 0, axis=1)
    each = np.arange(n_operators)
    turned_back = np.einsum("aij,aj->ai", rotations[inverse], offset[each, inverse])
    return GroupTable(
        rotations=rotations,
        product_operator=product,
        product_offset=offset,
        inverse_operator=inverse,
        inverse_offset=-turned_back,
    )


def _key(rotation: NDArray[np.int64], translation: NDArray[np.int64]) -> bytes:
    return rotation.tobytes() + (translation % TWENTY_FOURTHS).tobytes()


def inverse_elements(
    crystal: Crystal, elements: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Return the inverses of operators with their shifts.

    Parameters
    ----------
    crystal : Crystal
        Cell and operators.
    elements : ndarray of int, shape (n, 4)
        Operator index and whole cell shifts.

    Returns
    -------
    ndarray of int, shape (n, 4)
        Operator index and shifts of the inverses.

    Raises
    ------
    ValueError
        If the operators of the crystal do not form a group.
    """
    table = make_group_table(crystal)
    return np.column_stack(table.inverse(elements[:, 0], elements[:, 1:]))


def element_matrix(
    crystal: Crystal, operator: int, shift: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Return an operator and shift as a Cartesian transform.

    Parameters
    ----------
    crystal : Crystal
        Cell and operators.
    operator : int
        Operators.
    shift : ndarray of int, shape (3,)
        Whole cell shifts.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Cartesian x' = O (R (F x + f) + t + n) + o with the matrices and vectors of the
        file, so that frames other than the standard one are right too.
    """
    inner = np.eye(4)
    inner[:3, :3] = crystal.rotations[operator]
    inner[:3, 3] = crystal.translations[operator] / TWENTY_FOURTHS + shift
    return orthogonalising(crystal) @ inner @ fractionalising(crystal)


def orthogonalising(crystal: Crystal) -> NDArray[np.float64]:
    """Return the transform from fractional to Cartesian coordinates.

    Parameters
    ----------
    crystal : Crystal
        Cell and operators.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Cartesian transform with the translation in the last column.
    """
    matrix = np.eye(4)
    matrix[:3, :3] = crystal.orthogonalisation
    matrix[:3, 3] = crystal.orthogonalisation_shift
    return matrix


def fractionalising(crystal: Crystal) -> NDArray[np.float64]:
    """Return the transform from Cartesian to fractional coordinates.

    Parameters
    ----------
    crystal : Crystal
        Cell and operators.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Cartesian transform with the translation in the last column.
    """
    matrix = np.eye(4)
    matrix[:3, :3] = crystal.fractionalisation
    matrix[:3, 3] = crystal.fractionalisation_shift
    return matrix
