"""Contacts that are kept, opened and closed between two forms."""

from dataclasses import dataclass

import numpy as np

from structmap.contacts import CHAIN, KINDS
from structmap.forms.mapping import FormMap
from structmap.forms.reading import Form

NEIGHBOURS_IN_SEQUENCE = 3


@dataclass(frozen=True, slots=True, kw_only=True)
class ContactChange:
    """A contact of two places in two forms.

    Attributes
    ----------
    place_1, place_2 : int
        Places in the reference, rising.
    kind : str
        ``chain``, ``complex`` or ``lattice``.
    change : str
        ``kept``, ``opened`` (made in the first form, broken in the second) or
        ``closed`` (the other way).
    distance_1, distance_2 : float
        Shortest distance over all copies in Å; NaN where it is broken.
    """

    place_1: int
    place_2: int
    kind: str
    change: str
    distance_1: float
    distance_2: float


_Key = tuple[int, int, int]


def find_changes(
    first: Form, second: Form, *, first_map: FormMap, second_map: FormMap
) -> tuple[ContactChange, ...]:
    """Return the contacts that two forms share or do not share.

    A contact counts as made up to 4 Å and as broken beyond 5 Å in every copy. With one
    cutoff alone, small shifts about it look like contacts that open and close.

    Parameters
    ----------
    first, second : Form
        The two forms.
    first_map, second_map : FormMap
        Their residues laid on the reference.

    Returns
    -------
    tuple of ContactChange
        Of pairs of places that both forms model, sorted by place and kind; pairs up to
        three apart in the same chain are left out. One that is made in neither form,
        or neither made nor broken in one of them, is not listed, unless it is made in
        the other: then it is kept.
    """
    here, there = _shortest(first, first_map), _shortest(second, second_map)
    modelled = (first_map.first_residue >= 0) & (second_map.first_residue >= 0)
    changes = []
    for key in sorted(here.keys() | there.keys()):
        one, other = here.get(key, np.nan), there.get(key, np.nan)
        change = _change((one, other), (first.made_angstrom, second.made_angstrom))
        if change and modelled[key[0]] and modelled[key[1]]:
            changes.append(
                ContactChange(
                    place_1=key[0],
                    place_2=key[1],
                    kind=KINDS[key[2]],
                    change=change,
                    distance_1=one,
                    distance_2=other,
                )
            )
    return tuple(changes)


def _change(distance: tuple[float, float], made: tuple[float, float]) -> str:
    """Return what became of a contact, blank when it was never made."""
    is_made = distance[0] <= made[0], distance[1] <= made[1]  # NaN is never made
    if not any(is_made):
        return ""
    if np.isnan(distance[1]):
        return "opened"
    return "closed" if np.isnan(distance[0]) else "kept"


def _shortest(form: Form, form_map: FormMap) -> dict[_Key, float]:
    """Return the shortest distance of each pair of places and kind, if not broken."""
    contacts = form.contacts
    first = form_map.place[contacts.residue_1]
    second = form_map.place[contacts.residue_2]
    low, high = np.minimum(first, second), np.maximum(first, second)
    near = (contacts.kind == CHAIN) & (high - low <= NEIGHBOURS_IN_SEQUENCE)
    keep = (low >= 0) & ~near & (contacts.distance_angstrom <= form.broken_angstrom)
    out: dict[_Key, float] = {}
    rows = zip(
        *(low[keep].tolist(), high[keep].tolist(), contacts.kind[keep].tolist()),
        contacts.distance_angstrom[keep].tolist(),
        strict=True,
    )
    for one, other, kind, distance in rows:
        key = one, other, kind
        out[key] = min(distance, out.get(key, np.inf))
    return out
