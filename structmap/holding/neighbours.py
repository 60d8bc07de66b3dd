"""The neighbours in the crystal with their contacts and the area between."""

from collections.abc import Sequence

import numpy as np

from structmap.contacts import LATTICE, Contacts
from structmap.exposure import find_interfaces
from structmap.holding.record import Neighbour
from structmap.lattice import inverse_element, number_crystal_contacts
from structmap.structure import Assembly, Structure


def list_neighbours(
    structure: Structure, contacts: Contacts, *, assemblies: Sequence[Assembly]
) -> tuple[Neighbour, ...]:
    """Return the neighbours in the crystal with what lies between.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    contacts : Contacts
        Within the cutoff.
    assemblies : sequence of Assembly
        Assemblies whose contacts are complex.

    Returns
    -------
    tuple of Neighbour
        In the order of their numerals; empty without a crystal. The area is that of
        all pairs of chains that meet there, see `find_interfaces`.
    """
    crystal = structure.crystal
    numbered = number_crystal_contacts(structure, contacts)
    if crystal is None or not numbered.crystal_contacts:
        return ()
    place: dict[tuple[int, ...], int] = {
        (c.operator, *c.shift): i for i, c in enumerate(numbered.crystal_contacts)
    }
    area = np.full(len(place), np.nan if structure.ca_only else 0.0)
    if not structure.ca_only:
        found = find_interfaces(structure, assemblies=assemblies)
        keys = np.column_stack([found.operator, found.shift])
        for index in np.flatnonzero(found.kind == LATTICE):
            key = tuple(keys[index].tolist())
            either = place.get(key, place.get(inverse_element(crystal, keys[index])))
            # Surfaces may meet where no atoms come within the cutoff.
            if either is not None:
                area[either] += found.area[index]
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
