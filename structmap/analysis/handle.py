"""The object that users hold: tables, page, and a way to save them."""

import html
import tomllib
from collections.abc import Sequence
from pathlib import Path

import pandas as pd

from structmap.analysis.compute import analyse_table
from structmap.analysis.steps import Progress
from structmap.files import write_folder
from structmap.page import page_html
from structmap.result import AnalysisRecord
from structmap.settings import Settings, make_settings
from structmap.tables import (
    Table,
    contacts_table,
    mapped_coordinates,
    processes_table,
    run_text,
    sites_table,
    table_text,
    units_table,
)
from structmap.values import read_values
from structmap.words import summary_lines

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
        What the analysis found.
    coordinates : Path
        Coordinate file.
    """

    def __init__(self, record: AnalysisRecord, coordinates: Path) -> None:
        self.record = record
        self.coordinates = coordinates

    @property
    def sites(self) -> pd.DataFrame:
        """A row for each measured site, as in ``sites.csv``.

        Returns
        -------
        pandas.DataFrame
            In the order of the file.
        """
        return _frame(sites_table(self.record))

    @property
    def motional_units(self) -> pd.DataFrame:
        """A row for each motional unit, as in ``motional_units.csv``.

        Returns
        -------
        pandas.DataFrame
            By falling energy.
        """
        return _frame(units_table(self.record))

    @property
    def contacts(self) -> pd.DataFrame:
        """A row for each residue contact, as in ``contacts.csv``.

        Returns
        -------
        pandas.DataFrame
            Measured residues or not.
        """
        return _frame(_contacts_of(self.record))

    @property
    def page(self) -> str:
        """The whole page as HTML.

        Returns
        -------
        str
            One file that needs no network.
        """
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
        files: dict[str, str | bytes] = {
            name: table_text(processes_table(record))
            for name in ("one_process.csv",)
            if record.settings.model
        }
        write_folder(
            Path(folder),
            files
            | {
                "sites.csv": table_text(sites_table(record)),
                "motional_units.csv": table_text(units_table(record)),
                "contacts.csv": table_text(_contacts_of(record)),
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


def _contacts_of(record: AnalysisRecord) -> Table:
    return contacts_table(record.structure, record.contacts, chemistry=record.chemistry)


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
        A file in mmCIF or PDB format, gzipped or not.
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


def example_folder() -> Path:
    """Return the folder of the built-in example.

    Returns
    -------
    Path
        Inside the installed package, or in the source tree.
    """
    package = Path(__file__).parent.parent
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
