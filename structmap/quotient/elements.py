"""Symmetry elements: exact in a crystal, Cartesian where an assembly makes mates."""

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import (
    Contacts,
    GroupTable,
    contact_matrix,
    image_matrix,
    make_group_table,
)
from structmap.quotient.closure import Closure, close_group, close_transforms
from structmap.records import store_read_only
from structmap.structure import Crystal, Structure

SAME_ROTATION = 0.05
SAME_PLACE_ANGSTROM = 1.0


class Elements(Protocol):
    """Arithmetic with an array of symmetry elements, one a row."""

    def identity(self, count: int) -> NDArray[Any]:
        """Return the identity a number of times.

        Parameters
        ----------
        count : int
            How often.

        Returns
        -------
        ndarray
            One row each.
        """

    def product(self, first: NDArray[Any], second: NDArray[Any]) -> NDArray[Any]:
        """Return first · second, the second applied first.

        Parameters
        ----------
        first, second : ndarray
            Equally many rows.

        Returns
        -------
        ndarray
            One row each.
        """

    def inverse(self, element: NDArray[Any]) -> NDArray[Any]:
        """Return the inverses.

        Parameters
        ----------
        element : ndarray
            One row each.

        Returns
        -------
        ndarray
            One row each.
        """

    def is_identity(self, element: NDArray[Any]) -> NDArray[np.bool_]:
        """Tell which elements are the identity.

        Parameters
        ----------
        element : ndarray
            One row each.

        Returns
        -------
        ndarray of bool, shape (n,)
            One a row.
        """

    def distinct(self, element: NDArray[Any]) -> NDArray[Any]:
        """Return each element once.

        Parameters
        ----------
        element : ndarray
            One row each.

        Returns
        -------
        ndarray
            Fewer rows, or as many.
        """

    def transforms(self, element: NDArray[Any]) -> NDArray[np.float64]:
        """Return Cartesian transforms.

        Parameters
        ----------
        element : ndarray
            One row each.

        Returns
        -------
        ndarray of float, shape (n, 4, 4)
            Rotations and translations in Å.
        """

    def close(self, generators: NDArray[Any]) -> Closure:
        """Tell which group elements generate.

        Parameters
        ----------
        generators : ndarray
            One row each.

        Returns
        -------
        Closure
            What they generate together.
        """


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CrystalElements:
    """Elements of a space group as rows of operator index and three whole shifts.

    Attributes
    ----------
    structure : Structure
        One with a crystal.
    table : GroupTable
        Products and inverses of the crystal's operators.
    """

    structure: Structure
    table: GroupTable

    @property
    def crystal(self) -> Crystal:
        """Return the crystal.

        Returns
        -------
        Crystal
            That of the structure.

        Raises
        ------
        ValueError
            If the structure has none.
        """
        if self.structure.crystal is None:
            raise ValueError("the structure has no crystal; use CartesianElements")
        return self.structure.crystal

    def identity(self, count: int) -> NDArray[np.int64]:
        """Return the identity a number of times.

        Parameters
        ----------
        count : int
            How often.

        Returns
        -------
        ndarray of int, shape (count, 4)
            All zero.
        """
        return np.zeros((count, 4), dtype=np.int64)

    def product(
        self, first: NDArray[np.int64], second: NDArray[np.int64]
    ) -> NDArray[np.int64]:
        """Return first · second, the second applied first.

        Parameters
        ----------
        first, second : ndarray of int, shape (n, 4)
            Left and right factors.

        Returns
        -------
        ndarray of int, shape (n, 4)
            One row each.
        """
        left, right = (first[:, 0], first[:, 1:]), (second[:, 0], second[:, 1:])
        return np.column_stack(self.table.product(left, right))

    def inverse(self, element: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the inverses.

        Parameters
        ----------
        element : ndarray of int, shape (n, 4)
            One row each.

        Returns
        -------
        ndarray of int, shape (n, 4)
            One row each.
        """
        return np.column_stack(self.table.inverse(element[:, 0], element[:, 1:]))

    def is_identity(self, element: NDArray[np.int64]) -> NDArray[np.bool_]:
        """Tell which elements are the identity.

        Parameters
        ----------
        element : ndarray of int, shape (n, 4)
            One row each.

        Returns
        -------
        ndarray of bool, shape (n,)
            One a row.
        """
        return np.asarray(~element.any(axis=1))

    def distinct(self, element: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return each element once, sorted.

        Parameters
        ----------
        element : ndarray of int, shape (n, 4)
            One row each.

        Returns
        -------
        ndarray of int, shape (n_distinct, 4)
            In rising order.
        """
        return np.unique(element, axis=0)

    def transforms(self, element: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return Cartesian transforms.

        Parameters
        ----------
        element : ndarray of int, shape (n, 4)
            One row each.

        Returns
        -------
        ndarray of float, shape (n, 4, 4)
            One each.
        """
        made = [image_matrix(self.structure, int(k), n) for k, *n in element.tolist()]
        return np.array(made).reshape(-1, 4, 4)

    def close(self, generators: NDArray[np.int64]) -> Closure:
        """Tell which group the elements generate.

        Parameters
        ----------
        generators : ndarray of int, shape (n, 4)
            One row each.

        Returns
        -------
        Closure
            What they generate together.
        """
        operator, shift = generators[:, 0], generators[:, 1:]
        translations = self.crystal.translations[operator] + 24 * shift
        return close_group(
            self.crystal.rotations[operator],
            translations,
            orthogonalisation=self.crystal.orthogonalisation,
        )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CartesianElements:
    """Elements as Cartesian transforms, equal when they differ by rounding alone.

    Attributes
    ----------
    centre : ndarray, shape (3,)
        Middle of the molecule in Å; two transforms are one when their rotations agree
        and they move this point to the same place.
    """

    centre: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "centre", np.float64, (3,))

    def identity(self, count: int) -> NDArray[np.float64]:
        """Return the identity a number of times.

        Parameters
        ----------
        count : int
            How often.

        Returns
        -------
        ndarray of float, shape (count, 4, 4)
            Unit matrices.
        """
        return np.tile(np.eye(4), (count, 1, 1))

    def product(
        self, first: NDArray[np.float64], second: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return first · second, the second applied first.

        Parameters
        ----------
        first, second : ndarray of float, shape (n, 4, 4)
            Left and right factors.

        Returns
        -------
        ndarray of float, shape (n, 4, 4)
            One each.
        """
        return np.asarray(first @ second)

    def inverse(self, element: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the inverses.

        Parameters
        ----------
        element : ndarray of float, shape (n, 4, 4)
            One row each.

        Returns
        -------
        ndarray of float, shape (n, 4, 4)
            One each.
        """
        return np.asarray(np.linalg.inv(element), dtype=np.float64)

    def is_identity(self, element: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Tell which elements are the identity.

        Parameters
        ----------
        element : ndarray of float, shape (n, 4, 4)
            One row each.

        Returns
        -------
        ndarray of bool, shape (n,)
            One a row.
        """
        moved = element[:, :3, :3] @ self.centre + element[:, :3, 3] - self.centre
        turned = np.abs(element[:, :3, :3] - np.eye(3)).max(axis=(1, 2))
        stays = np.linalg.norm(moved, axis=1) < SAME_PLACE_ANGSTROM
        return np.asarray((turned < SAME_ROTATION) & stays)

    def distinct(self, element: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return each element once, the first of those that agree.

        Parameters
        ----------
        element : ndarray of float, shape (n, 4, 4)
            One row each.

        Returns
        -------
        ndarray of float, shape (n_distinct, 4, 4)
            In the order given.
        """
        kept: list[NDArray[np.float64]] = []
        for row in element:
            backward = np.linalg.inv(row)
            known = np.array(kept).reshape(-1, 4, 4)
            if not self.is_identity(known @ backward).any():
                kept.append(row)
        return np.array(kept).reshape(-1, 4, 4)

    def transforms(self, element: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the elements themselves.

        Parameters
        ----------
        element : ndarray of float, shape (n, 4, 4)
            One row each.

        Returns
        -------
        ndarray of float, shape (n, 4, 4)
            One each.
        """
        return element

    def close(self, generators: NDArray[np.float64]) -> Closure:
        """Tell which group the elements generate.

        Parameters
        ----------
        generators : ndarray of float, shape (n, 4, 4)
            One row each.

        Returns
        -------
        Closure
            What they generate together.
        """
        return close_transforms(generators, centre=self.centre)


def make_elements(structure: Structure, contacts: Contacts) -> Elements:
    """Return the arithmetic that fits a set of contacts.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Of that structure.

    Returns
    -------
    Elements
        Exact where every contact has an operator of the crystal, else Cartesian.
    """
    crystal = structure.crystal
    if crystal is None or (contacts.operator < 0).any():
        return CartesianElements(centre=structure.position.mean(axis=0))
    return CrystalElements(structure=structure, table=make_group_table(crystal))


def elements_of_contacts(
    structure: Structure,
    contacts: Contacts,
    *,
    elements: Elements,
    indices: NDArray[np.int64],
) -> NDArray[Any]:
    """Return the element that makes the image of the second residue of each contact.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Of that structure.
    elements : Elements
        What `make_elements` returned for them.
    indices : ndarray of int, shape (n,)
        Which contacts.

    Returns
    -------
    ndarray
        Rows of `elements`.
    """
    rows = np.column_stack([contacts.operator[indices], contacts.shift[indices]])
    if isinstance(elements, CrystalElements):
        return rows
    names = contacts.assembly_operator[indices]
    keys = [(*row, name) for row, name in zip(rows.tolist(), names, strict=True)]
    made: dict[tuple[Any, ...], NDArray[np.float64]] = {}
    for key, index in zip(keys, indices.tolist(), strict=True):
        if key not in made:
            made[key] = contact_matrix(structure, contacts, index)
    return np.array([made[key] for key in keys]).reshape(-1, 4, 4)
