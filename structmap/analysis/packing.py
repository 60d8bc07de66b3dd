"""How molecules pack, asked for the units of one analysis."""

import numpy as np

from structmap.analysis.evidence import Surroundings, spread_over_all
from structmap.cell import CellComparison, compare_cells, parse_cell
from structmap.chemistry import Chemistry, find_chemistry
from structmap.errors import SettingError
from structmap.holding import (
    Hold,
    NetworkEvidence,
    Packing,
    ask_network,
    describe_hold,
    list_neighbours,
    prepare_holding,
)
from structmap.lattice import NumberedContacts, number_crystal_contacts
from structmap.motional_units import UnitSearch
from structmap.quotient import assembly_extent
from structmap.result import MotionalUnit
from structmap.settings import Settings
from structmap.structure import Structure


def describe_packing(
    crystal: Surroundings,
    units: tuple[MotionalUnit, ...],
    *,
    search: UnitSearch,
    settings: Settings,
    rng: np.random.Generator,
) -> Packing:
    """Return how molecules pack and what that has to do with the units.

    Parameters
    ----------
    crystal : Surroundings
        The cell and its symmetry.
    units : tuple of MotionalUnit
        What was found.
    search : UnitSearch
        Which found it.
    settings : Settings
        Every choice of the analysis.
    rng : numpy.random.Generator
        Draws what the elastic network is compared with.

    Returns
    -------
    Packing
        Assemblies, neighbours, what holds each unit.

    Raises
    ------
    SettingError
        If the crystal of the sample is given in a way that cannot be read, or the file
        holds no crystal to compare it with.
    """
    structure, assemblies = crystal.structure, crystal.assemblies
    chemistry = find_chemistry(structure, crystal.contacts, assemblies=assemblies)
    numbered = number_crystal_contacts(structure, crystal.contacts)
    return Packing(
        assemblies=assemblies,
        chemistry=chemistry,
        numbered=numbered,
        extent=assembly_extent(structure, crystal.contacts),
        neighbours=list_neighbours(
            structure, crystal.contacts, numbered=numbered, assemblies=assemblies
        ),
        holds=_describe_holds(crystal, units, chemistry, numbered),
        sample=compare_sample(structure, settings),
        network=_ask_network(crystal, units, search, rng) if settings.network else None,
    )


def _describe_holds(
    crystal: Surroundings,
    units: tuple[MotionalUnit, ...],
    chemistry: Chemistry,
    numbered: NumberedContacts,
) -> tuple[Hold, ...]:
    if not units:
        return ()
    held = prepare_holding(
        crystal.structure,
        crystal.sites,
        contacts=crystal.contacts,
        chemistry=chemistry,
        numbered=numbered,
        assemblies=crystal.assemblies,
    )
    return tuple(
        describe_hold(unit.members, held, verdict=unit.lattice, name=unit.name)
        for unit in units
    )


def compare_sample(structure: Structure, settings: Settings) -> CellComparison | None:
    """Compare the crystal of the sample with that of the file.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    settings : Settings
        Cell and space group of the sample.

    Returns
    -------
    CellComparison or None
        None when neither is given.

    Raises
    ------
    SettingError
        If they cannot be read, or the file holds no crystal to compare them with.
    """
    if not settings.sample_cell and not settings.sample_space_group:
        return None
    if structure.crystal is None:
        name = "sample_cell" if settings.sample_cell else "sample_space_group"
        problem = f"is given, but {structure.name} holds no crystal to compare it with"
        raise SettingError("options", name, problem, "leave it out")
    return compare_cells(
        structure.crystal,
        cell=parse_cell(settings.sample_cell) if settings.sample_cell else None,
        space_group=settings.sample_space_group,
    )


def _ask_network(
    crystal: Surroundings,
    units: tuple[MotionalUnit, ...],
    search: UnitSearch,
    rng: np.random.Generator,
) -> NetworkEvidence | None:
    n_sites = len(crystal.sites.name)
    return ask_network(
        crystal.structure,
        crystal.sites,
        assemblies=crystal.assemblies,
        units=[unit.members for unit in units],
        deviation=spread_over_all(search.behaviour.deviation, search.site, n_sites),
        rng=rng,
    )
