"""Contacts that open or close between forms, and where they are drawn."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import KINDS, contact_matrix
from structmap.forms import Comparison, Form, FormMap
from structmap.page.scene import ANCHORS, SAME_PLACE_ANGSTROM
from structmap.structure import Structure


@dataclass(frozen=True, slots=True, kw_only=True)
class ChangedContact:
    """A contact that opens or closes between the measured form and another one.

    Attributes
    ----------
    place_1, place_2 : int
        Places in the reference, rising.
    kind : int
        Index into ``KINDS``.
    units : tuple of int
        Units that the two belong to, -1 for none.
    distances : tuple of float or None
        In each form the shortest distance in Å, NaN where it is broken, None where one
        of the two is not modelled.
    """

    place_1: int
    place_2: int
    kind: int
    units: tuple[int, int]
    distances: tuple[float | None, ...]


def changed_contacts(found: Comparison) -> tuple[ChangedContact, ...]:
    """Return the contacts that open or close in any form.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.

    Returns
    -------
    tuple of ChangedContact
        Those between members of units first, then by place.
    """
    unit_of = _unit_of_place(found)
    keys = {
        (change.place_1, change.place_2, KINDS.index(change.kind))
        for pair in found.pairs
        for change in pair.changes
        if change.change != "kept"
    }
    rows = [
        ChangedContact(
            place_1=first,
            place_2=second,
            kind=kind,
            units=(unit_of.get(first, -1), unit_of.get(second, -1)),
            distances=tuple(
                _distance(form, own, (first, second, kind))
                for form, own in zip(found.forms, found.maps, strict=True)
            ),
        )
        for first, second, kind in sorted(keys)
    ]
    rows.sort(key=lambda row: -sum(unit >= 0 for unit in row.units))
    return tuple(rows)


def _unit_of_place(found: Comparison) -> dict[int, int]:
    place = place_of_site(found)
    return {
        int(place[site]): index
        for index, unit in enumerate(found.units)
        for site in unit.members
    }


def place_of_site(found: Comparison) -> NDArray[np.int64]:
    """Return the place of each measured site in the reference.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.

    Returns
    -------
    ndarray of int, shape (n_sites,)
        -1 for one without a residue.
    """
    residue = found.sites[0].residue
    place: NDArray[np.int64] = np.where(residue >= 0, found.maps[0].place[residue], -1)
    return place


def _made(form: Form, form_map: FormMap, key: tuple[int, int, int]) -> list[int]:
    """Return the contacts of two places, the shortest first."""
    contacts = form.contacts
    first = form_map.place[contacts.residue_1]
    second = form_map.place[contacts.residue_2]
    wanted = (np.minimum(first, second) == key[0]) & (
        np.maximum(first, second) == key[1]
    )
    wanted &= contacts.kind == key[2]
    wanted &= contacts.distance_angstrom <= form.broken_angstrom
    found = np.flatnonzero(wanted)
    order = np.argsort(contacts.distance_angstrom[found], kind="stable")
    return [int(contact) for contact in found[order]]


def _distance(form: Form, form_map: FormMap, key: tuple[int, int, int]) -> float | None:
    if (form_map.first_residue[list(key[:2])] < 0).any():
        return None
    made = _made(form, form_map, key)
    return float(form.contacts.distance_angstrom[made[0]]) if made else float("nan")


# --- where they are drawn -------------------------------------------------------------


def moved_points(
    points: NDArray[np.float64], transform: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return points moved by a Cartesian transform.

    Parameters
    ----------
    points : ndarray of float, shape (n, 3)
        In Å.
    transform : ndarray of float, shape (4, 4)
        Rotation and translation.

    Returns
    -------
    ndarray of float, shape (n, 3)
        In Å.
    """
    moved: NDArray[np.float64] = points @ transform[:3, :3].T + transform[:3, 3]
    return moved


def hundredths(points: NDArray[np.float64]) -> list[int]:
    """Return coordinates as whole numbers of hundredths of Å, in one row.

    Parameters
    ----------
    points : ndarray of float, shape (n, 3)
        In Å.

    Returns
    -------
    list of int
        Three a point.
    """
    return np.round(100 * points).astype(int).ravel().tolist()


def anchor_of(structure: Structure, residue: int) -> NDArray[np.float64]:
    """Return where the bead of a residue stands.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    residue : int
        Index of a residue.

    Returns
    -------
    ndarray of float, shape (3,)
        Its CA (P, C4') in Å, else its first atom.
    """
    own = np.flatnonzero(structure.residue_of_atom == residue)
    for name in ANCHORS:
        found = own[structure.atom_name[own] == name]
        if len(found):
            own = found
            break
    place: NDArray[np.float64] = structure.position[own[0]]
    return place


def same_motion(first: NDArray[np.float64], second: NDArray[np.float64]) -> bool:
    """Return whether two transforms put things in the same place.

    Parameters
    ----------
    first, second : ndarray of float, shape (4, 4)
        Cartesian transforms.

    Returns
    -------
    bool
        True within 0.01 Å.
    """
    return bool(np.abs(first - second).max() < SAME_PLACE_ANGSTROM)


def contact_payload(
    found: Comparison, row: ChangedContact, *, transforms: list[NDArray[np.float64]]
) -> dict[str, Any]:
    """Return how a contact is drawn in each form.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.
    row : ChangedContact
        The contact.
    transforms : list of ndarray of float, shape (4, 4)
        Lay each drawn form on the measured one.

    Returns
    -------
    dict
        Places, kind and units; for each form None where one of the two is not modelled,
        else the distance (None where it is broken), the ends as it is drawn from each
        of the two residues, and whether it leads out of the first copies.
    """
    key = row.place_1, row.place_2, row.kind
    return {
        "places": key[:2],
        "kind": KINDS[row.kind],
        "units": row.units,
        "forms": [
            _contact_in_form(form, own, key, transform)
            for form, own, transform in zip(
                found.forms, found.maps, transforms, strict=False
            )
        ],
    }


def _contact_in_form(
    form: Form,
    form_map: FormMap,
    key: tuple[int, int, int],
    transform: NDArray[np.float64],
) -> dict[str, Any] | None:
    """Return where a contact is drawn, from each of its residues in first copies.

    None where one of the two is not modelled; without ends where it is broken, and from
    a residue of which only another copy has it.
    """
    home = form_map.first_residue[list(key[:2])].tolist()
    if min(home) < 0:
        return None
    made = _made(form, form_map, key)
    if not made:
        return {"distance": None}
    shortest = float(form.contacts.distance_angstrom[made[0]])
    ends: list[list[list[int]] | None] = [None, None]
    away = False
    for contact in reversed(made):  # the shortest is written last
        for near, far, matrix in _both_ways(form, contact):
            if near not in home:
                continue
            points = (
                anchor_of(form.structure, near)[None],
                moved_points(anchor_of(form.structure, far)[None], matrix),
            )
            drawn = [hundredths(moved_points(point, transform)) for point in points]
            ends[home.index(near)] = drawn
            away = far not in home or not same_motion(matrix, np.eye(4))
    return {"distance": round(shortest, 2), "ends": ends, "away": away}


def _both_ways(form: Form, contact: int) -> list[tuple[int, int, NDArray[np.float64]]]:
    """Return each residue of a contact with its partner and the partner's image."""
    first = int(form.contacts.residue_1[contact])
    second = int(form.contacts.residue_2[contact])
    matrix = contact_matrix(form.structure, form.contacts, contact)
    return [
        (first, second, matrix),
        (second, first, np.asarray(np.linalg.inv(matrix))),
    ]
