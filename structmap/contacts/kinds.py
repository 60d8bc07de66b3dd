"""Telling contacts of the chain, of the assembly and of the lattice apart."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from structmap.contacts.assemblies import Frame
from structmap.contacts.group import GroupTable
from structmap.contacts.record import CHAIN, COMPLEX, LATTICE


def kinds_of_contacts(
    copy_1: NDArray[np.int64],
    copy_2: NDArray[np.int64],
    *,
    place: NDArray[np.int64],
    elements: NDArray[np.int64],
    frames: Sequence[Frame],
    table: GroupTable | None,
) -> NDArray[np.int64]:
    """Return the kind of each contact.

    Parameters
    ----------
    copy_1, copy_2 : ndarray of int, shape (n,)
        Chain copies of the two residues.
    place : ndarray of int, shape (n,)
        Which element makes the image of the second.
    elements : ndarray of int, shape (n_elements, 4)
        Operator and shift; operator -1 for a mate that only an assembly makes.
    frames : sequence of Frame
        Members of the assemblies.
    table : GroupTable or None
        None without a crystal.

    Returns
    -------
    ndarray of int, shape (n,)
        ``CHAIN``, ``COMPLEX`` or ``LATTICE``.

    Notes
    -----
    A contact (a, b, g) is `complex` if one and the same assembly holds h a and h g b
    for some element h. This does not depend on which copy stands in the file. Without
    a crystal all that is not `chain` is `complex`.
    """
    n_copies = int(max(copy_1.max(initial=0), copy_2.max(initial=0))) + 1
    key = (place * n_copies + copy_1) * n_copies + copy_2
    distinct, back = np.unique(key, return_inverse=True)
    kinds = []
    for number in distinct.tolist():
        rest, second = divmod(number, n_copies)
        index, first = divmod(rest, n_copies)
        kinds.append(_kind((first, second), elements[index], frames, table))
    return np.array(kinds, dtype=np.int64)[back]


def _kind(
    copies: tuple[int, int],
    element: NDArray[np.int64],
    frames: Sequence[Frame],
    table: GroupTable | None,
) -> int:
    if copies[0] == copies[1] and not element.any():
        return CHAIN
    if element[0] < 0 or table is None:
        return COMPLEX
    together = (_stand_together(frame, copies, element, table) for frame in frames)
    return COMPLEX if any(together) else LATTICE


def _stand_together(
    frame: Frame,
    copies: tuple[int, int],
    element: NDArray[np.int64],
    table: GroupTable,
) -> bool:
    firsts = np.array(list(frame.members.get(copies[0], ())), dtype=np.int64)
    seconds = frame.members.get(copies[1], {})
    if not len(firsts) or not seconds:
        return False
    repeated = np.repeat(element[None], len(firsts), axis=0)
    operator, shift = table.product(
        (firsts[:, 0], firsts[:, 1:]), (repeated[:, 0], repeated[:, 1:])
    )
    products = np.column_stack([operator, shift]).tolist()
    return any((k, a, b, c) in seconds for k, a, b, c in products)
