"""The opening view of the picture, computed before the page is written."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from structmap.page.scene import DrawnAtoms, Images, anchor_positions
from structmap.result import AnalysisRecord

TURNS = 72
MARGIN_ANGSTROM = 3.0
COVERING_ANGSTROM = 2.5
SEEN_AT_MOST, MEMBERS_AT_MOST = 800, 60


@dataclass(frozen=True, slots=True, kw_only=True)
class OpeningView:
    """Where one looks from.

    Attributes
    ----------
    centre : tuple of float
        Point in the middle of the picture, in Å.
    quaternion : tuple of float
        Rotation x, y, z, w.
    half_width, half_height : float
        What must fit in, in Å from the centre.
    depth : float
        Half the depth of what is drawn, in Å.
    """

    centre: tuple[float, float, float]
    quaternion: tuple[float, float, float, float]
    half_width: float
    half_height: float
    depth: float


def opening_view(
    record: AnalysisRecord, atoms: DrawnAtoms, images: Images
) -> OpeningView:
    """Return the view that shows units with least covered, the crystal from aside.

    The horizontal axis runs between the two images of the operator that joins the first
    lattice-joined unit, else along the longest axis of the molecule; of 72 turns about
    it the one is taken with least covering of unit members and least height.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    atoms : DrawnAtoms
        Atoms that the page carries.
    images : Images
        Neighbours that touch the molecule.

    Returns
    -------
    OpeningView
        The same for the same input.
    """
    molecule = anchor_positions(record.structure, atoms)
    joining = _joining_images(record, images)
    axis = _horizontal_axis(molecule, images, joining)
    joined = _joined_members(record, atoms, images)
    framed = np.concatenate([molecule, joined])
    members = _member_positions(record, atoms)
    best = _least_covered(framed, members, axis)
    turned = framed @ best.T
    low, high = turned.min(axis=0), turned.max(axis=0)
    centre = best.T @ ((low + high) / 2)
    half = (high - low) / 2 + MARGIN_ANGSTROM
    x, y, z, w = Rotation.from_matrix(best).as_quat(canonical=True)
    return OpeningView(
        centre=(_short(centre[0]), _short(centre[1]), _short(centre[2])),
        quaternion=(_short(x), _short(y), _short(z), _short(w)),
        half_width=_short(half[0]),
        half_height=_short(half[1]),
        depth=_short(half[2]),
    )


def _short(number: float) -> float:
    return round(float(number), 4)


def _joining_images(record: AnalysisRecord, images: Images) -> list[int]:
    """Return the two main images that join the first unit held by the crystal."""
    for unit in record.units:
        contacts = unit.lattice.contacts
        if unit.lattice.verdict.startswith("lattice") and len(contacts):
            found = images.of_contact[contacts]
            if not (found >= 0).any():
                continue
            main = int(np.bincount(found[found >= 0]).argmax())
            return [main, images.inverse[main]]
    return []


def _horizontal_axis(
    molecule: NDArray[np.float64], images: Images, joining: list[int]
) -> NDArray[np.float64]:
    middle = molecule.mean(axis=0)
    if joining and joining[1] >= 0:
        ends = [
            images.matrices[i][:3, :3] @ middle + images.matrices[i][:3, 3]
            for i in joining
        ]
        axis = ends[1] - ends[0]
        if np.linalg.norm(axis) < 1.0:
            axis = ends[0] - middle
    else:
        axis = np.linalg.svd(molecule - middle, full_matrices=False)[2][0]
    if not np.linalg.norm(axis) > 1e-6:
        axis = np.array([1.0, 0.0, 0.0])
    axis = axis / np.linalg.norm(axis)
    largest = np.argmax(np.abs(np.round(axis, 6)))
    signed: NDArray[np.float64] = axis if axis[largest] > 0 else -axis
    return signed


def _joined_members(
    record: AnalysisRecord, atoms: DrawnAtoms, images: Images
) -> NDArray[np.float64]:
    """Return where members of units stand in the neighbours that join them."""
    positions = anchor_positions(record.structure, atoms)
    contacts = record.contacts
    found = [np.empty((0, 3))]
    for unit in record.units:
        if not unit.lattice.verdict.startswith("lattice"):
            continue
        for contact in unit.lattice.contacts.tolist():
            for residue, image in (
                (contacts.residue_2[contact], images.of_contact[contact]),
                (contacts.residue_1[contact], images.back_of_contact[contact]),
            ):
                if image >= 0:
                    matrix = images.matrices[image]
                    found.append(
                        (matrix[:3, :3] @ positions[residue] + matrix[:3, 3])[None]
                    )
    return np.concatenate(found)


def _member_positions(record: AnalysisRecord, atoms: DrawnAtoms) -> NDArray[np.float64]:
    positions = anchor_positions(record.structure, atoms)
    members = [unit.members for unit in record.units]
    if not members:
        return np.empty((0, 3))
    own = np.isin(record.sites.copy_site, np.concatenate(members))
    return positions[record.sites.copy_residue[own]]


def _least_covered(
    framed: NDArray[np.float64], members: NDArray[np.float64], axis: NDArray[np.float64]
) -> NDArray[np.float64]:
    frames = [_frame(axis, 2 * np.pi * turn / TURNS) for turn in range(TURNS)]
    heights = np.array([np.ptp(framed @ frame[1]) for frame in frames])
    some = _every_nth(framed, SEEN_AT_MOST)
    targets = _every_nth(members, MEMBERS_AT_MOST)
    covered = np.array([_share_covered(some, targets, frame) for frame in frames])
    cost = covered + heights / heights.min()
    return frames[int(np.argmin(np.round(cost, 6)))]


def _every_nth(points: NDArray[np.float64], at_most: int) -> NDArray[np.float64]:
    return points[:: max(1, -(-len(points) // at_most))]


def _frame(axis: NDArray[np.float64], angle: float) -> NDArray[np.float64]:
    """Return a rotation whose first row is the axis, turned about it by an angle."""
    start = np.zeros(3)
    start[np.argmin(np.abs(axis))] = 1.0
    side = np.cross(axis, start)
    side /= np.linalg.norm(side)
    other = np.cross(axis, side)
    up = np.cos(angle) * side + np.sin(angle) * other
    return np.array([axis, up, np.cross(axis, up)])


def _share_covered(
    framed: NDArray[np.float64],
    members: NDArray[np.float64],
    frame: NDArray[np.float64],
) -> float:
    """Return how many beads on average stand close in front of a unit's member."""
    if not len(members):
        return 0.0
    seen, targets = framed @ frame.T, members @ frame.T
    apart = targets[:, None, :] - seen[None, :, :]
    close = (apart[..., :2] ** 2).sum(axis=2) < COVERING_ANGSTROM**2
    return float((close & (apart[..., 2] < -0.5)).sum()) / len(members)
