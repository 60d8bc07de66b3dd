"""The main entry: coordinates and values in, a result out."""

import html
import tomllib
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import pandas as pd

from structmap.behaviour import take_measurements
from structmap.contacts import (
    KINDS,
    choose_assemblies,
    contact_cutoff,
    find_contacts,
    make_site_graph,
)
from structmap.experiment import SPINNING_MODEL, convert_to_base, points_left_out
from structmap.files import write_folder
from structmap.lattice import judge_lattice
from structmap.motional_units import find_motional_units
from structmap.page import page_html
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.settings import Settings, make_settings
from structmap.sites import Sites, match_rows, match_sites, site_centres
from structmap.structure import Structure, read_structure
from structmap.tables import (
    Table,
    contacts_table,
    mapped_coordinates,
    run_text,
    sites_table,
    table_text,
    units_table,
)
from structmap.values import ValueTable, read_mapping, read_values
from structmap.words import summary_lines

Progress = Callable[[str, float], None]
EXAMPLE_COORDINATES, EXAMPLE_VALUES = "4cup.cif.gz", "invented_values.csv"
EXAMPLE_SETTINGS = "settings.toml"
EXAMPLE_FILES = (EXAMPLE_COORDINATES, EXAMPLE_VALUES, EXAMPLE_SETTINGS)


class Analysis:
    """What `analyse` returns: the record, with tables, page and a way to save them.

    Parameters
    ----------
    record : AnalysisRecord
        Everything that was found.
    coordinates : Path
        The coordinate file, which is read again for ``mapped.cif``.

    Attributes
    ----------
    record : AnalysisRecord
    coordinates : Path
    """

    def __init__(self, record: AnalysisRecord, coordinates: Path) -> None:
        self.record = record
        self.coordinates = coordinates

    @property
    def sites(self) -> pd.DataFrame:
        """A row for each measured site, as in ``sites.csv``."""
        return _frame(sites_table(self.record))

    @property
    def motional_units(self) -> pd.DataFrame:
        """A row for each motional unit, as in ``motional_units.csv``."""
        return _frame(units_table(self.record))

    @property
    def contacts(self) -> pd.DataFrame:
        """A row for each residue contact, as in ``contacts.csv``."""
        return _frame(contacts_table(self.record.structure, self.record.contacts))

    @property
    def page(self) -> str:
        """The whole page as HTML."""
        return page_html(self.record)

    def summary(self, page: str = "page.html") -> str:
        """Return the result in five lines.

        Parameters
        ----------
        page : str, default "page.html"
            Where the page is.

        Returns
        -------
        str
            Lines of text.
        """
        return "\n".join(summary_lines(self.record, page))

    def save(self, folder: Path | str) -> Path:
        """Write all tables, the page, the mapped coordinates and the run record.

        Parameters
        ----------
        folder : Path or str
            Made when it does not exist; other files in it stay.

        Returns
        -------
        Path
            The folder.

        Raises
        ------
        FileProblemError
            If the folder cannot be written or the coordinates changed since.
        """
        record = self.record
        write_folder(
            Path(folder),
            {
                "sites.csv": table_text(sites_table(record)),
                "motional_units.csv": table_text(units_table(record)),
                "contacts.csv": table_text(
                    contacts_table(record.structure, record.contacts)
                ),
                "mapped.cif": mapped_coordinates(record, self.coordinates),
                "run.json": run_text(record),
                "page.html": page_html(record),
            },
        )
        return Path(folder)

    def _repr_html_(self) -> str:
        content = html.escape(self.page, quote=True)
        style = "width:100%;height:900px;border:0"
        frame = f'<iframe sandbox="allow-scripts" style="{style}"'
        return f'{frame} srcdoc="{content}"></iframe>'


def _frame(table: Table) -> pd.DataFrame:
    return pd.DataFrame(table.rows, columns=list(table.columns))


def analyse(
    coordinates: Path | str,
    values: Path | str | Sequence[Path | str],
    settings: Settings | None = None,
    *,
    progress: Progress | None = None,
) -> Analysis:
    """Find the motional units of a molecule and what holds them together.

    Parameters
    ----------
    coordinates : Path or str
        mmCIF or PDB file, gzipped or not.
    values : Path or str, or sequence of them
        Tables of measured values, joined by site.
    settings : Settings, optional
        Every choice; the defaults when left out.
    progress : callable, optional
        Called with the name of a step and the share done.

    Returns
    -------
    Analysis
        Tables, page, and `save`.

    Raises
    ------
    StructmapError
        If a file cannot be used; the message names file, row or residue, what is wrong
        and what to do.
    """
    settings = settings or Settings()
    paths = [values] if isinstance(values, str | Path) else list(values)
    table = read_values([Path(path) for path in paths], columns=settings.columns)
    record = analyse_table(Path(coordinates), table, settings, progress=progress)
    return Analysis(record, Path(coordinates))


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
        mmCIF or PDB file.
    table : ValueTable
    settings : Settings
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
    tell = progress or _say_nothing
    tell("reading coordinates", 0.0)
    structure = read_structure(coordinates, model=settings.coordinate_model)
    tell("matching the numbering", 0.1)
    sites = _matched(structure, table, settings)
    tell("finding contacts over the crystal", 0.2)
    cutoff = _cutoff(structure, settings)
    assemblies = choose_assemblies(structure, settings.assembly)
    contacts = find_contacts(structure, reach_angstrom=cutoff, assemblies=assemblies)
    graph = make_site_graph(contacts, sites, cutoff_angstrom=cutoff)
    tell("finding motional units", 0.4)
    measurements = take_measurements(
        table,
        sites,
        quantity=settings.quantity,
        profile_part=settings.profile_part,
        model_name=settings.model,
        point_reason=_point_reasons(table, settings),
    )
    search = find_motional_units(measurements, graph, site_centres(structure, sites))
    units = tuple(
        MotionalUnit(
            name=f"U{number}",
            members=members,
            energy=float(search.energy[number - 1]),
            contrast=float(search.contrast[number - 1]),
            verdict="",
            p_any=np.nan,
            p_place=np.nan,
            p_smooth=np.nan,
            stability=np.nan,
            fringe=np.zeros(0, dtype=np.int64),
            lattice=judge_lattice(
                members,
                graph,
                structure=structure,
                sites=sites,
                contacts=contacts,
                assemblies=assemblies,
            ),
        )
        for number, members in enumerate(search.members, start=1)
    )
    tell("done", 1.0)
    return AnalysisRecord(
        settings=settings,
        structure=structure,
        table=table,
        sites=sites,
        contacts=contacts,
        graph=graph,
        measurements=measurements,
        behaviour=search.behaviour,
        units=units,
        membership_probability=np.full(len(sites.name), np.nan),
        warnings=(),
    )


def _point_reasons(table: ValueTable, settings: Settings) -> tuple[str, ...]:
    """Return why points of the profile cannot be carried; empty without a profile."""
    profiles = [q for q in table.quantities if len(q.x)]
    if settings.quantity:
        profiles = [q for q in profiles if q.name in settings.quantity]
    if not profiles:
        return ()
    profile = profiles[0]
    if settings.model != SPINNING_MODEL:
        return ("",) * len(profile.x)
    return points_left_out(
        convert_to_base(profile.x, profile.x_unit, quantity=profile.x_name, base="Hz"),
        model_name=settings.model,
        mas_rate_hertz=settings.mas_rate_hertz,
        proton_frequency_megahertz=settings.proton_frequency_megahertz,
        sample=settings.sample,
    )


def _say_nothing(step: str, share: float) -> None:
    del step, share


# --- the smaller jobs -----------------------------------------------------------------


def example_folder() -> Path:
    """Return the folder of the built-in example.

    Returns
    -------
    Path
        Inside the installed package, or in the source tree.
    """
    package = Path(__file__).parent
    installed = package / "examples"
    return installed if installed.is_dir() else package.parent / "examples"


def analyse_example(folder: Path, *, progress: Progress | None = None) -> Analysis:
    """Run the main job on the built-in example and write everything.

    Parameters
    ----------
    folder : Path
        Where to write; coordinates, values and settings are copied there too.
    progress : callable, optional
        Called with the name of a step and the share done.

    Returns
    -------
    Analysis
        Of invented values on a real coordinate file.

    Raises
    ------
    FileProblemError
        If the folder cannot be written.
    """
    source = example_folder()
    inputs = {name: (source / name).read_bytes() for name in EXAMPLE_FILES}
    settings = make_settings(tomllib.loads(inputs[EXAMPLE_SETTINGS].decode("utf-8")))
    result = analyse(
        source / EXAMPLE_COORDINATES,
        source / EXAMPLE_VALUES,
        settings,
        progress=progress,
    )
    write_folder(folder, inputs)
    result.save(folder)
    return result


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
    sites = _matched(structure, table, settings)
    rows = match_rows(structure, table, sites)
    columns = tuple(rows[0]) if rows else ()
    listing = Table(columns=columns, rows=tuple(tuple(row.values()) for row in rows))
    return listing, match_notes(sites)


def _matched(structure: Structure, table: ValueTable, settings: Settings) -> Sites:
    return match_sites(
        structure,
        table,
        offset=settings.offset,
        mapping=read_mapping(Path(settings.mapping)) if settings.mapping else None,
        named_chains_only=settings.named_chains_only,
        exclude=settings.exclude,
    )


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
    tell = progress or _say_nothing
    tell("reading coordinates", 0.0)
    structure = read_structure(Path(coordinates), model=settings.coordinate_model)
    tell("finding contacts over the crystal", 0.3)
    assemblies = choose_assemblies(structure, settings.assembly)
    found = find_contacts(
        structure, reach_angstrom=_cutoff(structure, settings), assemblies=assemblies
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
    return contacts_table(structure, found), (*notes, *structure.warnings)


def _cutoff(structure: Structure, settings: Settings) -> float:
    return contact_cutoff(
        structure,
        cutoff_angstrom=settings.cutoff_angstrom,
        ca_cutoff_angstrom=settings.ca_cutoff_angstrom,
    )
