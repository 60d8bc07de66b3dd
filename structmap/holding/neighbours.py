"""The neighbours in the crystal with their contacts and the area between."""

from collections.abc import Sequence

import numpy as np

from structmap.contacts import LATTICE, Contacts, inverse_elements
from structmap.exposure import find_interfaces
from structmap.holding.record import Neighbour
from structmap.lattice import NumberedContacts
from structmap.structure import Assembly, Structure


def list_neighbours(
    structure: Structure,
    contacts: Contacts,
    *,
    numbered: NumberedContacts,
    assemblies: Sequence[Assembly],
) -> tuple[Neighbour, ...]:
    """Return the neighbours in the crystal with what lies between.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Within the cutoff.
    numbered : NumberedContacts
        Numerals of those contacts.
    assemblies : sequence of Assembly
        Assemblies whose contacts are complex.

    Returns
    -------
    tuple of Neighbour
        In the order of their numerals; empty without a crystal. The area is that of
        all pairs of chains that meet there, see `find_interfaces`.
    """
    crystal = structure.crystal
    if crystal is None or not numbered.crystal_contacts:
        return ()
    place: dict[tuple[int, ...], int] = {
        (c.operator, *c.shift): i for i, c in enumerate(numbered.crystal_contacts)
    }
    area = np.full(len(place), np.nan if structure.ca_only else 0.0)
    if not structure.ca_only:
        found = find_interfaces(structure, assemblies=assemblies)
        of_lattice = np.flatnonzero(found.kind == LATTICE)
        keys = np.column_stack([found.operator, found.shift])[of_lattice]
        back = inverse_elements(crystal, keys)
        for index, *ways in zip(of_lattice, keys.tolist(), back.tolist(), strict=True):
            known = [place[tuple(way)] for way in ways if tuple(way) in place]
            # Surfaces may meet where no atoms come within the cutoff.
            if known:
                area[known[0]] += found.area[index]
    lattice = numbered.of_contact >= 0
    pairs = np.bincount(
        numbered.of_contact[lattice],
        weights=contacts.n_atom_pairs[lattice],
        minlength=len(place),
    )
    return tuple(
        Neighbour(
            numeral=contact.numeral,
            text=contact.text,
            n_contacts=contact.n_contacts,
            n_atom_pairs=int(pairs[index]),
            area=float(area[index]),
        )
        for index, contact in enumerate(numbered.crystal_contacts)
    )
