"""The whole way from coordinates and values to a record."""

from dataclasses import replace
from pathlib import Path

import numpy as np

from structmap.analysis.beside import look_beside
from structmap.analysis.evidence import (
    Surroundings,
    describe_units,
    graphs_at_cutoffs,
    known_baseline,
    spread_membership,
)
from structmap.analysis.packing import describe_packing
from structmap.analysis.processes import describe_molecule, judge_processes
from structmap.analysis.steps import (
    Progress,
    cutoff_of,
    kept_points_note,
    match_by_settings,
    point_reasons,
    say_nothing,
)
from structmap.behaviour import Measurements, take_measurements
from structmap.contacts import choose_assemblies, find_contacts, make_site_graph
from structmap.exposure import find_exposure
from structmap.motional_units import find_motional_units
from structmap.result import AnalysisRecord
from structmap.secondary import assign_secondary_structure
from structmap.settings import Settings
from structmap.significance import Effort, judge_units, list_cautions
from structmap.sites import Sites, part_ligands, site_centres
from structmap.structure import Structure, read_structure
from structmap.values import ValueTable

# Threads for the tests of chance; the result does not depend on their number.
WORKERS = 2


def analyse_table(
    coordinates: Path,
    table: ValueTable,
    settings: Settings,
    *,
    progress: Progress | None = None,
) -> AnalysisRecord:
    """Analyse values that are in memory already.

    Parameters
    ----------
    coordinates : Path
        A file in mmCIF or PDB format.
    table : ValueTable
        The measured values.
    settings : Settings
        Every choice of the analysis.
    progress : callable, optional
        Called with the name of a step and the share done.

    Returns
    -------
    AnalysisRecord
        Everything that was found.

    Raises
    ------
    StructmapError
        If the file cannot be used or the numbering cannot be reconciled.
    """
    tell = progress or say_nothing
    crystal, cutoff = _surround(coordinates, table, settings, tell=tell)
    structure, sites = crystal.structure, crystal.sites
    tell("finding motional units", 0.4)
    measurements = _measurements(table, sites, settings)
    search = find_motional_units(
        measurements,
        crystal.graph,
        site_centres(structure, sites),
        direction=settings.direction,
        baseline=known_baseline(table, sites, measurements, settings),
    )
    # One child a step, in this order; a new step joins at the end.
    children = np.random.default_rng(settings.seed).spawn(4)
    random_of_judging, random_of_process, random_of_molecule = children[:3]
    graphs = graphs_at_cutoffs(crystal, cutoff)
    judgement = None
    if settings.most_permutations:
        judgement = judge_units(
            search,
            graphs,
            rng=random_of_judging,
            progress=lambda step, share: tell(step, 0.5 + 0.4 * share),
            effort=_effort(settings),
        )
    tell("asking what holds the units together", 0.9)
    units = describe_units(search, judgement, crystal)
    packing = describe_packing(
        crystal, units, search=search, settings=settings, rng=children[3]
    )
    tell("asking whether one process explains them", 0.95)
    processes = judge_processes(
        table, sites, search, settings=settings, rng=random_of_process
    )
    return AnalysisRecord(
        settings=settings,
        structure=structure,
        table=table,
        sites=sites,
        contacts=crystal.contacts,
        graph=crystal.graph,
        measurements=measurements,
        behaviour=search.behaviour,
        units=units,
        membership_probability=spread_membership(search, judgement, len(sites.name)),
        chemistry=packing.chemistry.text,
        exposure=find_exposure(structure, assemblies=crystal.assemblies),
        packing=packing,
        processes=processes,
        process_notes=describe_molecule(table, settings, rng=random_of_molecule),
        reason=search.reason,
        warnings=(
            *list_cautions(search, judgement),
            *kept_points_note(table, settings),
        ),
        beside=look_beside(
            table, search, measurements, crystal, settings=settings, graphs=graphs
        ),
    )


def _with_secondary(structure: Structure) -> Structure:
    """Assign the secondary structure where the file records none."""
    if structure.has_secondary_structure:
        return structure
    return replace(structure, secondary_structure=assign_secondary_structure(structure))


def _measurements(table: ValueTable, sites: Sites, settings: Settings) -> Measurements:
    return take_measurements(
        table,
        sites,
        quantity=settings.quantity,
        profile_part=settings.profile_part,
        model_name=settings.model,
        point_reason=point_reasons(table, settings),
    )


def _surround(
    coordinates: Path, table: ValueTable, settings: Settings, *, tell: Progress
) -> tuple[Surroundings, float]:
    """Read, match, find the contacts; return them with the cutoff."""
    tell("reading coordinates", 0.0)
    structure = _with_secondary(
        read_structure(coordinates, model=settings.coordinate_model)
    )
    tell("matching the numbering", 0.1)
    parted = part_ligands(structure, match_by_settings(structure, table, settings))
    structure, sites = parted.structure, parted.sites
    tell("finding contacts over the crystal", 0.2)
    cutoff = cutoff_of(structure, settings)
    assemblies = choose_assemblies(structure, settings.assembly)
    contacts = find_contacts(structure, reach_angstrom=cutoff, assemblies=assemblies)
    return (
        Surroundings(
            structure=structure,
            sites=sites,
            contacts=contacts,
            graph=make_site_graph(contacts, sites, cutoff_angstrom=cutoff),
            assemblies=assemblies,
        ),
        cutoff,
    )


def _effort(settings: Settings) -> Effort:
    return Effort(
        most_permutations=settings.most_permutations,
        repeats=settings.repeats,
        workers=WORKERS,
    )
