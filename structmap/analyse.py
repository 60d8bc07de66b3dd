"""The main entry: coordinates and values in, a result out."""

import html
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from structmap.behaviour import take_measurements
from structmap.contacts import (
    choose_assemblies,
    contact_cutoff,
    contacts_within,
    find_contacts,
    make_site_graph,
)
from structmap.errors import FileProblemError
from structmap.experiment import points_left_out, to_base_unit
from structmap.files import write_folder
from structmap.lattice import judge_lattice
from structmap.motional_units import find_motional_units
from structmap.page import page_html
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.settings import Settings
from structmap.sites import match_sites, site_centres
from structmap.structure import read_structure
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
                "contacts.csv": table_text(contacts_table(record.structure, record.contacts)),
                "mapped.cif": mapped_coordinates(record, self.coordinates),
                "run.json": run_text(record),
                "page.html": page_html(record),
            },
        )
        return Path(folder)

    def _repr_html_(self) -> str:
        content = html.escape(self.page, quote=True)
        style = "width:100%;height:900px;border:0"
        return f'<iframe sandbox="allow-scripts" style="{style}" srcdoc="{content}"></iframe>'


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
    structure = read_structure(coordinates, model=settings.model)
    tell("matching the numbering", 0.1)
    sites = match_sites(
        structure,
        table,
        offset=settings.offset,
        mapping=read_mapping(Path(settings.mapping)) if settings.mapping else None,
        named_chains_only=settings.named_chains_only,
        exclude=settings.exclude,
    )
    tell("finding contacts over the crystal", 0.2)
    cutoff = contact_cutoff(
        structure,
        cutoff_angstrom=settings.cutoff_angstrom,
        ca_cutoff_angstrom=settings.ca_cutoff_angstrom,
    )
    assemblies = choose_assemblies(structure, settings.assembly)
    contacts = find_contacts(structure, reach_angstrom=cutoff, assemblies=assemblies)
    graph = make_site_graph(contacts, sites, cutoff_angstrom=cutoff)
    tell("finding motional units", 0.4)
    measurements = take_measurements(
        table,
        sites,
        quantity=settings.quantity,
        profile_part=settings.profile_part,
        model_name=settings.model_name,
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


def _say_nothing(step: str, share: float) -> None:
    del step, share
