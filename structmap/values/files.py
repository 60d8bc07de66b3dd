"""Reading value tables from files of any kind."""

import re
from collections.abc import Collection, Sequence
from pathlib import Path

from structmap.errors import FileProblemError
from structmap.values.grid import Grid, Source, binary_kind, read_source, read_text
from structmap.values.headers import NUMBER_NAMES
from structmap.values.joining import join_readings
from structmap.values.layout import find_layout
from structmap.values.reading import Reading, take_rows
from structmap.values.records import ValueTable
from structmap.values.sheets import read_parquet, read_sheet
from structmap.values.star import read_star

_COORDINATES = re.compile(rb"(?:HEADER|CRYST1|REMARK|TITLE |MODEL |ATOM  ) ")
_STAR_START = re.compile(rb"\s*(?:#[^\n]*\n\s*)*(?:data|save)_\S", re.IGNORECASE)


def read_values(
    paths: Path | str | Sequence[Path | str], *, columns: Sequence[str] = ()
) -> ValueTable:
    """Read measured values from one file or several, joined by site.

    A wide table has a row a site; each quantity is a column ``NAME`` with its errors
    in ``NAME_error`` (also ``NAME_err``, ``NAME_sd``), its unit in brackets. A long
    table has a row a point, with columns ``x``, ``value`` and ``error``; the quantity
    is called ``value``, or as the header names it (``value=R1rho [s-1]``, or a column
    ``R1rho`` in place of ``value``), or as a column ``quantity`` says row by row.
    Three or more columns of a wide table that differ in a number with a unit
    (``R1rho_5kHz``) are points of a profile.

    Parameters
    ----------
    paths : path or sequence of paths
        CSV, TSV or other text, Excel (.xlsx), Parquet, NMR-STAR 3 or NEF; text may be
        gzipped.
    columns : sequence of str
        Names of the columns, in order, of a table without a header; ``-`` skips one.

    Returns
    -------
    ValueTable
        Sites of all files and what was measured on them.

    Raises
    ------
    FileProblemError
        If a file is missing, empty, damaged, no table, or given twice.
    NoSiteColumnError
        If no column gives the residue number.
    NoQuantityError
        If no column holds measured values.
    UnclearColumnsError
        If columns can be taken in more than one way.
    UnreadableCellError
        If a cell holds text where a number is due, or a negative error.
    RaggedRowError
        If a row has fewer or more cells than the header.
    RepeatedRowError
        If two rows give the same site and point.
    MissingExtraError
        If a kind of file needs a package that is not installed.
    ValueError
        If no path is given.
    """
    listed = [paths] if isinstance(paths, str | Path) else list(paths)
    if not listed:
        raise ValueError("paths is empty; name at least one file of values")
    readings: list[Reading] = []
    for path in listed:
        source = read_source(Path(path))
        if source.sha256 in {reading.sha256 for reading in readings}:
            remedy = "name each file once"
            raise FileProblemError(path, "has the content of a file before it", remedy)
        readings.append(_read_table(source, columns))
    return join_readings(readings)


def read_grid(
    source: Source, columns: Sequence[str], *, keys: Collection[str] = NUMBER_NAMES
) -> Grid:
    """Read the cells of a table of any kind.

    Parameters
    ----------
    source : Source
        The file, as bytes.
    columns : sequence of str
        Names of the columns of a table without a header; empty when it has one.
    keys : collection of str
        Names of a column that must be there.

    Returns
    -------
    Grid
        Its cells.

    Raises
    ------
    FileProblemError
        If it is no table.
    """
    kind = binary_kind(source)
    if kind == "sheet":
        return read_sheet(source, columns, keys=keys)
    if kind == "parquet":
        return read_parquet(source, keys=keys)
    return read_text(source, columns, keys=keys)


def _read_table(source: Source, columns: Sequence[str]) -> Reading:
    head = source.content[:200_000]
    if _COORDINATES.match(head) or b"\n_atom_site." in head:
        problem = "holds coordinates, not measured values"
        remedy = "give the coordinates first and the values after them"
        raise FileProblemError(source.path, problem, remedy)
    if _STAR_START.match(head):
        return read_star(source)
    grid = read_grid(source, columns)
    return take_rows(grid, find_layout(grid), sha256=source.sha256)
