"""Comparing several forms of one protein."""

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from structmap.forms.changes import ContactChange, find_changes
from structmap.forms.mapping import (
    FormMap,
    map_form,
    reference_of,
    sites_in_form,
)
from structmap.forms.reading import Form, FormUnit, read_form, read_units
from structmap.forms.superposition import RigidBody, find_rigid_bodies
from structmap.forms.units import UnitInForm, judge_unit_in_form, verdict_over_forms
from structmap.sites import Sites
from structmap.structure import Structure, residue_label
from structmap.tables import Cell, Table

UNIT_COLUMNS = (
    *("motional_unit", "coordinates", "space_group", "connected", "kinds"),
    *("lattice_operators", "verdict_over_forms", "lattice_verdict", "n_members"),
    *("n_modelled", "level_without_assemblies"),
)
CONTACT_COLUMNS = (
    *("coordinates_1", "coordinates_2", "site_1", "site_2", "kind", "change"),
    *("distance_angstrom_1", "distance_angstrom_2", "motional_unit_1"),
    "motional_unit_2",
)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FormPair:
    """A form against the one that was measured.

    Attributes
    ----------
    name : str
        The other form.
    bodies : tuple of RigidBody
        Rigid parts, the core first; members are places of the reference.
    transform : ndarray of float, shape (4, 4)
        Lays the other form on the measured one by the core; the identity when no part
        is rigid.
    rms_angstrom : float
        Over all places that both model after superposition on the core.
    n_modelled : int
        Places that both model.
    n_mutations : int
        Residues that differ.
    changes : tuple of ContactChange
        From the measured form to the other.
    """

    name: str
    bodies: tuple[RigidBody, ...]
    transform: NDArray[np.float64]
    rms_angstrom: float
    n_modelled: int
    n_mutations: int
    changes: tuple[ContactChange, ...]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Comparison:
    """Several forms of one protein compared.

    Attributes
    ----------
    forms : tuple of Form
        The measured one first.
    maps : tuple of FormMap
        Residues of each form laid on the measured chains.
    sites : tuple of Sites
        The measured sites with their copies in each form.
    units : tuple of FormUnit
        Units of the measured form.
    units_in_forms : tuple of tuple of UnitInForm
        For each unit, each form.
    verdicts : tuple of str
        For each unit, what the forms say together.
    pairs : tuple of FormPair
        Each other form against the measured one.
    forms_table, contacts_table : Table
        ``forms.csv`` and ``contacts_between_forms.csv``.
    """

    forms: tuple[Form, ...]
    maps: tuple[FormMap, ...]
    sites: tuple[Sites, ...]
    units: tuple[FormUnit, ...]
    units_in_forms: tuple[tuple[UnitInForm, ...], ...]
    verdicts: tuple[str, ...]
    pairs: tuple[FormPair, ...]
    forms_table: Table
    contacts_table: Table


def compare_folders(folders: Sequence[Path]) -> Comparison:
    """Compare the analyses of the same values on several forms.

    Parameters
    ----------
    folders : sequence of Path
        What ``structmap analyse`` wrote; the form that was measured first.

    Returns
    -------
    Comparison
        Units of the first folder in all forms.

    Raises
    ------
    FileProblemError
        If a folder is not one of an analysis.
    DifferentProteinError
        If a form holds another protein.
    ValueError
        If fewer than two folders are given.
    """
    if len(folders) < 2:
        raise ValueError(f"{len(folders)} folders are given; give two or more")
    forms = [read_form(Path(folder)) for folder in folders]
    sites, units = read_units(Path(folders[0]), forms[0].structure)
    return compare_forms(forms, sites, units=units)


def compare_forms(
    forms: Sequence[Form], sites: Sites, *, units: Sequence[FormUnit]
) -> Comparison:
    """Compare several forms of one protein.

    Parameters
    ----------
    forms : sequence of Form
        The measured one first, another one at least.
    sites : Sites
        Measured sites in the first form.
    units : sequence of FormUnit
        Units of the first form.

    Returns
    -------
    Comparison
        Contacts and units; all forms are named differently, by a number where names
        repeat.

    Raises
    ------
    DifferentProteinError
        If a form holds another protein.
    """
    names = _distinct_names([form.name for form in forms])
    reference = reference_of(forms[0].structure, sites)
    maps = [map_form(form.structure, reference) for form in forms]
    own_sites = [sites, *(sites_in_form(sites, maps[0], other) for other in maps[1:])]
    in_forms = tuple(
        tuple(
            judge_unit_in_form(unit.members, form, sites=own)
            for form, own in zip(forms, own_sites, strict=True)
        )
        for unit in units
    )
    verdicts = tuple(verdict_over_forms(found) for found in in_forms)
    pairs = tuple(
        _make_pair(name, (forms[0], form), (maps[0], own))
        for name, form, own in zip(names[1:], forms[1:], maps[1:], strict=True)
    )
    return Comparison(
        forms=tuple(forms),
        maps=tuple(maps),
        sites=tuple(own_sites),
        units=tuple(units),
        units_in_forms=in_forms,
        verdicts=verdicts,
        pairs=pairs,
        forms_table=_forms_table(names, forms, units, in_forms, verdicts),
        contacts_table=_contacts_table(
            names[0],
            pairs,
            forms[0].structure,
            maps[0],
            _unit_of_place(sites, units, maps[0]),
        ),
    )


def _distinct_names(names: Sequence[str]) -> list[str]:
    seen: dict[str, int] = {}
    out = []
    for name in names:
        seen[name] = seen.get(name, 0) + 1
        out.append(name if seen[name] == 1 else f"{name} ({seen[name]})")
    return out


def _make_pair(
    name: str, forms: tuple[Form, Form], maps: tuple[FormMap, FormMap]
) -> FormPair:
    first, second = (
        _positions(form.structure, own) for form, own in zip(forms, maps, strict=True)
    )
    both = np.flatnonzero(np.isfinite(first[:, 0]) & np.isfinite(second[:, 0]))
    found = find_rigid_bodies(first[both], second[both])
    bodies = tuple(
        RigidBody(
            members=both[body.members],
            transform=body.transform,
            rms_angstrom=body.rms_angstrom,
        )
        for body in found
    )
    transform = bodies[0].transform if bodies else np.eye(4)
    moved = second[both] @ transform[:3, :3].T + transform[:3, 3]
    gap = ((first[both] - moved) ** 2).sum(axis=1)
    return FormPair(
        name=name,
        bodies=bodies,
        transform=transform,
        rms_angstrom=float(np.sqrt(gap.mean())) if len(both) else float("nan"),
        n_modelled=len(both),
        n_mutations=maps[1].n_mutations,
        changes=find_changes(*forms, first_map=maps[0], second_map=maps[1]),
    )


def _positions(structure: Structure, form_map: FormMap) -> NDArray[np.float64]:
    """Return the CA (P) position on each place of the reference, NaN for none."""
    wanted = np.isin(structure.atom_name, ["CA", "P"])
    wanted &= structure.model_of_atom == structure.model_of_atom.min(initial=0)
    atoms = np.flatnonzero(wanted)[::-1]  # the first alternative is written last
    by_residue = np.full((len(structure.kind_of_residue), 3), np.nan)
    by_residue[structure.residue_of_atom[atoms]] = structure.position[atoms]
    out = np.full((len(form_map.first_residue), 3), np.nan)
    modelled = form_map.first_residue >= 0
    out[modelled] = by_residue[form_map.first_residue[modelled]]
    return out


def _unit_of_place(
    sites: Sites, units: Sequence[FormUnit], reference_map: FormMap
) -> dict[int, str]:
    return {
        int(reference_map.place[sites.residue[site]]): unit.name
        for unit in units
        for site in unit.members
        if sites.residue[site] >= 0
    }


def _forms_table(
    names: Sequence[str],
    forms: Sequence[Form],
    units: Sequence[FormUnit],
    in_forms: Sequence[Sequence[UnitInForm]],
    verdicts: Sequence[str],
) -> Table:
    rows: list[tuple[Cell, ...]] = []
    for unit, found, verdict in zip(units, in_forms, verdicts, strict=True):
        for name, form, own in zip(names, forms, found, strict=True):
            crystal = form.structure.crystal
            rows.append(
                (
                    *(unit.name, name, crystal.space_group if crystal else None),
                    *(own.connected, " ".join(own.kinds)),
                    *("; ".join(own.lattice_operators), verdict, own.lattice_verdict),
                    *(own.n_members, own.n_modelled, own.level_without_assemblies),
                )
            )
    return Table(columns=UNIT_COLUMNS, rows=tuple(rows))


def _contacts_table(
    name: str,
    pairs: Sequence[FormPair],
    structure: Structure,
    reference_map: FormMap,
    unit_of_place: dict[int, str],
) -> Table:
    residue = reference_map.first_residue
    rows: list[tuple[Cell, ...]] = [
        (
            *(name, pair.name),
            residue_label(structure, int(residue[change.place_1])),
            residue_label(structure, int(residue[change.place_2])),
            *(change.kind, change.change, change.distance_1, change.distance_2),
            unit_of_place.get(change.place_1),
            unit_of_place.get(change.place_2),
        )
        for pair in pairs
        for change in pair.changes
    ]
    return Table(columns=CONTACT_COLUMNS, rows=tuple(rows))
