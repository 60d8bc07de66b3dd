"""What is looked at beside the units: other choices, the other part, other methods."""

from dataclasses import replace

import numpy as np

from structmap.analysis.evidence import Surroundings
from structmap.analysis.steps import point_reasons
from structmap.behaviour import Measurements, take_measurements
from structmap.contacts import SiteGraph, find_contacts, make_site_graph
from structmap.motional_units import UnitSearch
from structmap.motional_units.beside import Beside
from structmap.motional_units.choices import (
    Alternative,
    vary_contacts,
    vary_thresholds,
)
from structmap.motional_units.other_part import OtherPart, look_at_other_part
from structmap.motional_units.second_opinion import ask_second_opinion
from structmap.settings import ProfilePart, Settings
from structmap.significance import cutoffs_to_vary
from structmap.sites import site_centres
from structmap.structure import Structure
from structmap.values import ValueTable

OTHER_PART: dict[str, ProfilePart] = {"shape": "level", "level": "shape"}


def look_beside(
    table: ValueTable,
    search: UnitSearch,
    measurements: Measurements,
    crystal: Surroundings,
    *,
    settings: Settings,
    graphs: tuple[SiteGraph, ...],
) -> Beside:
    """Return what other choices, the other part of profiles and other methods show.

    Parameters
    ----------
    table : ValueTable
        The measured values.
    search : UnitSearch
        What was found.
    measurements : Measurements
        What was compared.
    crystal : Surroundings
        The molecule, its sites, its crystal.
    settings : Settings
        Every choice of the analysis.
    graphs : tuple of SiteGraph
        Contacts at the cutoffs of `cutoffs_to_vary`.

    Returns
    -------
    Beside
        Empty when no unit can be told from the data.
    """
    if search.reason:
        return Beside()
    return Beside(
        other_part=_look_at_other_part(
            table, search, measurements, crystal, settings=settings
        ),
        choices=_vary_choices(search, crystal, settings, graphs),
        second_opinion=ask_second_opinion(search) if settings.second_opinion else None,
    )


def _look_at_other_part(
    table: ValueTable,
    search: UnitSearch,
    measurements: Measurements,
    crystal: Surroundings,
    *,
    settings: Settings,
) -> OtherPart | None:
    if not measurements.is_profile or measurements.part not in OTHER_PART:
        return None
    other = take_measurements(
        table,
        crystal.sites,
        quantity=settings.quantity,
        profile_part=OTHER_PART[measurements.part],
        model_name=settings.model,
        point_reason=point_reasons(table, settings),
    )
    return look_at_other_part(
        search,
        other,
        crystal.graph,
        centres=site_centres(crystal.structure, crystal.sites),
    )


def _vary_choices(
    search: UnitSearch,
    crystal: Surroundings,
    settings: Settings,
    graphs: tuple[SiteGraph, ...],
) -> tuple[Alternative, ...]:
    ca_only = crystal.structure.ca_only
    chosen = settings.ca_cutoff_angstrom if ca_only else settings.cutoff_angstrom
    atoms = "CA atoms" if ca_only else "heavy atoms"
    cutoffs = cutoffs_to_vary(chosen, ca_only=ca_only)
    others = {
        f"{atoms} within {cutoff:g}\u00a0Å": graph
        for cutoff, graph in zip(cutoffs, graphs, strict=True)
        if cutoff != chosen
    }
    by_ca = None if ca_only else _graph_by_ca(crystal, settings.ca_cutoff_angstrom)
    if by_ca is not None:
        others[f"CA atoms within {settings.ca_cutoff_angstrom:g}\u00a0Å"] = by_ca
    return vary_contacts(search, others) + vary_thresholds(search)


def _graph_by_ca(crystal: Surroundings, cutoff: float) -> SiteGraph | None:
    """Return the contacts between CA atoms; None where a measured residue has none."""
    thin = _ca_alone(crystal.structure)
    measured = crystal.sites.residue[crystal.sites.residue >= 0]
    if not np.isin(measured, thin.residue_of_atom).all():
        return None
    contacts = find_contacts(thin, reach_angstrom=cutoff, assemblies=crystal.assemblies)
    return make_site_graph(contacts, crystal.sites, cutoff_angstrom=cutoff)


def _ca_alone(structure: Structure) -> Structure:
    keep = structure.atom_name == "CA"
    of_atoms = (
        *("position", "residue_of_atom", "model_of_atom", "atom_name", "element"),
        *("altloc", "occupancy", "b_iso"),
    )
    thinned = {name: getattr(structure, name)[keep] for name in of_atoms}
    return replace(structure, ca_only=True, **thinned)
