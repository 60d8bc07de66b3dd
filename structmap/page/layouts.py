"""Where the members of each unit stand when it is drawn in one piece over images."""

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap import words
from structmap.contacts import CHAIN, Contacts, contact_matrix
from structmap.holding import LEVEL_OF_VERDICT
from structmap.page.listing import Listing
from structmap.page.markup import pretty_operator
from structmap.page.scene import SAME_PLACE_ANGSTROM, Images
from structmap.quotient import UnitLayout, lay_out_unit
from structmap.result import AnalysisRecord, MotionalUnit

MOST_REPEATS = 6
LARGEST_RING = 24

_Matrix = NDArray[np.float64]
_Step = tuple[int, _Matrix, _Matrix, _Matrix]


@dataclass(slots=True)
class ImageList:
    """Images by number: those that touch the molecule, then what layouts need beyond.

    Attributes
    ----------
    images : Images
        Neighbours that touch the molecule.
    beyond : list of ndarray of float, shape (4, 4)
        Cartesian transforms of further ones, in the order in which they were asked for.
    printed : dict of int to tuple
        Operator and whole shifts of further ones that hold members.
    """

    images: Images
    beyond: list[_Matrix] = field(default_factory=list)
    printed: dict[int, tuple[str, list[int]]] = field(default_factory=dict)

    def number(self, matrix: _Matrix) -> int:
        """Return the number of an image, a new one if it is not known.

        Parameters
        ----------
        matrix : ndarray of float, shape (4, 4)
            Cartesian transform.

        Returns
        -------
        int
            -1 for the molecule itself.
        """
        if _same(matrix, np.eye(4)):
            return -1
        for index, known in enumerate([*self.images.matrices, *self.beyond]):
            if _same(matrix, known):
                return index
        self.beyond.append(matrix)
        return len(self.images.keys) + len(self.beyond) - 1


def _same(first: _Matrix, second: _Matrix) -> bool:
    return bool(np.abs(first - second).max() < SAME_PLACE_ANGSTROM)


def layouts_payload(
    record: AnalysisRecord, listing: Listing, images: Images
) -> tuple[list[dict[str, Any] | None], list[dict[str, Any]]]:
    """Return how each unit is drawn in one piece, and the images that this needs.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.
    images : Images
        Neighbours that touch the molecule.

    Returns
    -------
    layouts : list of dict or None
        For each unit its members with residue and image, the contacts that join them
        across images, and where it closes or goes on; None for a unit that lies in one
        chain as the file has it and ends there.
    beyond : list of dict
        Operator, shift and matrix of images that do not touch the molecule themselves;
        they are numbered on from those that do.
    """
    known = ImageList(images)
    layouts = [_layout(record, listing, unit, known) for unit in record.units]
    first = len(images.keys)
    beyond = []
    for index, matrix in enumerate(known.beyond):
        operator, shift = known.printed.get(first + index, ("", [0, 0, 0]))
        beyond.append(
            {
                "printed": pretty_operator(operator),
                "shift": shift,
                "numeral": "",
                "matrix": np.round(matrix[:3], 6).ravel().tolist(),
            }
        )
    return layouts, beyond


def _layout(
    record: AnalysisRecord, listing: Listing, unit: MotionalUnit, known: ImageList
) -> dict[str, Any] | None:
    structure = record.structure
    laid = lay_out_unit(
        unit.members, structure, sites=record.sites, contacts=record.contacts
    )
    level = LEVEL_OF_VERDICT.get(unit.lattice.verdict, len(laid.levels) - 1)
    closes = laid.levels[level].closure.closes
    one_chain = len(np.unique(structure.copy_of_residue[laid.residue])) == 1
    at_home = _same(laid.transform, np.eye(4)[None])
    if one_chain and at_home and closes == "finite":
        return None
    image = [known.number(matrix) for matrix in laid.transform]
    _print_beyond(record, laid, image, known)
    joined, onward = _steps(record, laid, level)
    if closes == "finite":
        onward = []
    motions = _repeats(onward, is_ring=closes == "ring")
    if closes not in ("finite", "ring"):
        motions = _nearest(motions, _middle(record, laid))
    entry = {int(site): index for index, site in enumerate(listing.site) if site >= 0}
    return {
        "members": [entry[site] for site in laid.site.tolist()],
        "residues": laid.residue.tolist(),
        "images": image,
        "joined": [_numbered(step, known) for step in joined],
        "onward": [_numbered(step, known) for step in onward],
        "again": [
            [known.number(motion @ matrix) for matrix in laid.transform]
            for motion in motions
        ],
        "closes": words.closing_line(record, unit),
        "ring": closes == "ring",
    }


def _print_beyond(
    record: AnalysisRecord, laid: UnitLayout, image: list[int], known: ImageList
) -> None:
    crystal = record.structure.crystal
    rows = zip(image, laid.operator.tolist(), laid.shift.tolist(), strict=True)
    for index, operator, shift in rows:
        if crystal is not None and operator >= 0:
            known.printed[index] = crystal.triplets[operator], shift


def _numbered(step: _Step, known: ImageList) -> list[int]:
    contact, first, _, second = step
    return [contact, known.number(first), known.number(second)]


def _steps(
    record: AnalysisRecord, laid: UnitLayout, level: int
) -> tuple[list[_Step], list[_Step]]:
    """Return contacts between drawn members, and those that lead out to another copy.

    Each comes with the place of its first residue, that of the member which its second
    one is, and the place where the contact puts the second one.
    """
    contacts = record.contacts
    at = dict(zip(laid.residue.tolist(), laid.transform, strict=True))
    joined, onward = [], []
    for contact in _between(contacts, laid.residue):
        first = int(contacts.residue_1[contact])
        second = int(contacts.residue_2[contact])
        put = at[first] @ contact_matrix(record.structure, contacts, contact)
        step = contact, at[first], at[second], put
        if not _same(put, at[second]):
            if contacts.kind[contact] <= level:
                onward.append(step)
        elif contacts.kind[contact] != CHAIN:
            joined.append(step)
    return joined, onward


def _between(contacts: Contacts, residues: NDArray[np.int64]) -> list[int]:
    inside = np.isin(contacts.residue_1, residues)
    inside &= np.isin(contacts.residue_2, residues)
    return np.flatnonzero(inside).tolist()


def _repeats(onward: list[_Step], *, is_ring: bool) -> list[_Matrix]:
    """Return the motions that lay the unit on copies of itself.

    Of a ring all its copies, of something endless those that it touches.
    """
    motions: list[_Matrix] = []
    for _, _, standing, put in onward:
        motion = put @ np.linalg.inv(standing)
        _add(motions, motion)
        _add(motions, np.linalg.inv(motion))
    steps = list(motions) if is_ring else []
    for motion in motions:  # grows while it is walked
        for step in steps:
            if len(motions) < LARGEST_RING:
                _add(motions, motion @ step)
    return motions


def _add(motions: list[_Matrix], motion: _Matrix) -> None:
    if not any(_same(motion, known) for known in [np.eye(4), *motions]):
        motions.append(motion)


def _middle(record: AnalysisRecord, laid: UnitLayout) -> NDArray[np.float64]:
    structure = record.structure
    own = [
        structure.position[structure.residue_of_atom == residue].mean(axis=0)
        @ matrix[:3, :3].T
        + matrix[:3, 3]
        for residue, matrix in zip(laid.residue, laid.transform, strict=True)
    ]
    middle: NDArray[np.float64] = np.mean(own, axis=0)
    return middle


def _nearest(motions: list[_Matrix], middle: NDArray[np.float64]) -> list[_Matrix]:
    shift = [
        float(np.linalg.norm(m[:3, :3] @ middle + m[:3, 3] - middle)) for m in motions
    ]
    order = sorted(range(len(motions)), key=lambda i: (round(shift[i], 2), i))
    return [motions[i] for i in order[:MOST_REPEATS]]
