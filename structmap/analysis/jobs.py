"""The smaller jobs: only the numbering, only the contacts."""

from collections.abc import Sequence
from pathlib import Path

from structmap.analysis.steps import (
    Progress,
    cutoff_of,
    match_by_settings,
    say_nothing,
)
from structmap.chemistry import find_chemistry
from structmap.contacts import KINDS, choose_assemblies, find_contacts
from structmap.settings import Settings
from structmap.sites import Sites, match_rows
from structmap.structure import read_structure
from structmap.tables import Table, contacts_table
from structmap.values import read_values


def match_numbering(
    coordinates: Path | str,
    values: Path | str | Sequence[Path | str],
    settings: Settings,
) -> tuple[Table, tuple[str, ...]]:
    """Bring the numbering of values and coordinates together and no more.

    Parameters
    ----------
    coordinates : Path or str
    values : Path or str, or sequence of them
    settings : Settings

    Returns
    -------
    table : Table
        A row for each row of the values.
    notes : tuple of str
        Offsets, copies, names that differ, rows without a residue.

    Raises
    ------
    StructmapError
        If a file cannot be used or the numbering is ambiguous.
    """
    paths = [values] if isinstance(values, str | Path) else list(values)
    table = read_values([Path(path) for path in paths], columns=settings.columns)
    structure = read_structure(Path(coordinates), model=settings.coordinate_model)
    sites = match_by_settings(structure, table, settings)
    rows = match_rows(structure, table, sites)
    columns = tuple(rows[0]) if rows else ()
    listing = Table(columns=columns, rows=tuple(tuple(row.values()) for row in rows))
    return listing, match_notes(sites)


def match_notes(sites: Sites) -> tuple[str, ...]:
    """Return the reconciliation of the numbering in lines.

    Parameters
    ----------
    sites : Sites

    Returns
    -------
    tuple of str
        One line a chain, one a mismatch, one an unmatched row.
    """
    lines = []
    for chain in sites.chains:
        text = f"chain {chain.auth_asym_id}: offset {chain.offset:+d} ({chain.how}), "
        text += f"{chain.n_matched} rows matched"
        if chain.n_named:
            text += f", {chain.n_agreeing} of {chain.n_named} names agree"
        lines.append(text)
    lines += [f"name differs: {phrase}" for phrase in sites.mismatches]
    lines += [f"no residue: {phrase}" for phrase in sites.unmatched]
    return (*lines, *sites.notes)


def list_contacts(
    coordinates: Path | str, settings: Settings, *, progress: Progress | None = None
) -> tuple[Table, tuple[str, ...]]:
    """List the residue contacts over the crystal.

    Parameters
    ----------
    coordinates : Path or str
    settings : Settings
    progress : callable, optional
        Called with the name of a step and the share done.

    Returns
    -------
    table : Table
        As ``contacts.csv``.
    notes : tuple of str
        Counts by kind, what the kinds rest on, what is odd about the file.

    Raises
    ------
    StructmapError
        If the file cannot be used.
    """
    tell = progress or say_nothing
    tell("reading coordinates", 0.0)
    structure = read_structure(Path(coordinates), model=settings.coordinate_model)
    tell("finding contacts over the crystal", 0.3)
    assemblies = choose_assemblies(structure, settings.assembly)
    found = find_contacts(
        structure, reach_angstrom=cutoff_of(structure, settings), assemblies=assemblies
    )
    counts = ", ".join(
        f"{(found.kind == k).sum()} {kind}" for k, kind in enumerate(KINDS)
    )
    notes = [f"{len(found.kind)} residue contacts: {counts}"]
    if structure.crystal is None:
        notes.append(f"no lattice contacts, because {structure.no_crystal_reason}")
    names = ", ".join(
        f"{a.name} ({a.oligomer})" if a.oligomer else a.name for a in assemblies
    )
    notes.append(f"assemblies that make contacts complex: {names or 'none stated'}")
    chemistry = find_chemistry(structure, found, assemblies=assemblies).text
    table = contacts_table(structure, found, chemistry=chemistry)
    return table, (*notes, *structure.warnings)
