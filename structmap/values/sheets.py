"""Tables that are not text: Excel sheets and Parquet."""

import io
import zipfile
from collections.abc import Collection, Iterable, Sequence
from dataclasses import replace
from typing import Any

from structmap.errors import FileProblemError, MissingExtraError
from structmap.values.errors import NoSiteColumnError
from structmap.values.grid import Grid, Source, mend_decimal_comma
from structmap.values.headers import NUMBER_NAMES, find_column
from structmap.values.residues import is_residue_number

_Row = tuple[int, tuple[str, ...]]


def read_sheet(
    source: Source, columns: Sequence[str], *, keys: Collection[str] = NUMBER_NAMES
) -> Grid:
    """Read the first sheet of an Excel workbook that holds anything.

    Parameters
    ----------
    source : Source
        The file, as bytes.
    columns : sequence of str
        Names of the columns of a sheet without a header; empty when it has one.
    keys : collection of str
        Names of a column that must be there.

    Returns
    -------
    Grid
        Its cells.

    Raises
    ------
    MissingExtraError
        If openpyxl is not installed.
    FileProblemError
        If it is no workbook, or an empty one.
    NoSiteColumnError
        If no column gives the residue number.
    """
    try:
        import openpyxl  # noqa: PLC0415 - an extra
    except ImportError:
        raise MissingExtraError(
            f"Reading {source.path.name}", "openpyxl", "xlsx"
        ) from None
    try:
        book = openpyxl.load_workbook(io.BytesIO(source.content), data_only=True)
    except (zipfile.BadZipFile, KeyError, OSError, ValueError) as error:
        problem = "is no Excel workbook, or a damaged one"
        raise FileProblemError(
            source.path, problem, "save it as .xlsx or CSV again"
        ) from error
    filled = [
        sheet for sheet in book.worksheets if sheet.max_row and _rows(sheet.values)
    ]
    if not filled:
        remedy = "give a table of measured values"
        raise FileProblemError(source.path, "holds no filled sheet", remedy)
    name = source.path.name
    note = f"{name}: sheet {filled[0].title!r} of {len(filled)} was read."
    grid = _grid(source, _rows(filled[0].values), columns, keys)
    return replace(grid, notes=(note, *grid.notes)) if len(filled) > 1 else grid


def read_parquet(source: Source, *, keys: Collection[str] = NUMBER_NAMES) -> Grid:
    """Read a Parquet table.

    Parameters
    ----------
    source : Source
        The file, as bytes.
    keys : collection of str
        Names of a column that must be there.

    Returns
    -------
    Grid
        Its cells.

    Raises
    ------
    MissingExtraError
        If pyarrow is not installed.
    FileProblemError
        If the file is damaged.
    NoSiteColumnError
        If no column gives the residue number.
    """
    try:
        import pyarrow as pa  # noqa: PLC0415 - an extra
        import pyarrow.parquet as pq  # noqa: PLC0415
    except ImportError:
        raise MissingExtraError(
            f"Reading {source.path.name}", "pyarrow", "parquet"
        ) from None
    try:
        table = pq.read_table(io.BytesIO(source.content))
    except (pa.ArrowException, OSError) as error:
        problem = "is a damaged or truncated Parquet file"
        raise FileProblemError(source.path, problem, "write it again") from error
    names = [
        name for name in table.column_names if not name.startswith("__index_level_")
    ]
    cells = zip(*(table[name].to_pylist() for name in names), strict=True)
    rows = _rows([tuple(names), *cells])
    return _grid(source, rows, (), keys)


def _rows(values: Iterable[tuple[Any, ...]]) -> list[_Row]:
    """Return the numbered rows that hold anything, as text."""
    rows = [(n, tuple(_text(cell) for cell in row)) for n, row in enumerate(values, 1)]
    return [(n, row) for n, row in rows if any(row)]


def _text(cell: object) -> str:
    """Return a cell as text that reads back as the same number."""
    return "" if cell is None else str(cell).strip()


def _grid(
    source: Source, rows: list[_Row], columns: Sequence[str], keys: Collection[str]
) -> Grid:
    comments = tuple(" ".join(row).strip(" #") for _, row in rows if _is_comment(row))
    content = [(n, row) for n, row in rows if not _is_comment(row)]
    header = tuple(columns)
    if not content:
        remedy = "give a table of measured values"
        raise FileProblemError(source.path, "holds nothing but comments", remedy)
    if not header:
        header, content = content[0][1], content[1:]
    site = find_column(header, keys)
    if site < 0:
        raise NoSiteColumnError(source.path, tuple(name for name in header if name))
    if columns and not is_residue_number((*content[0][1], *[""] * len(header))[site]):
        content = content[1:]
    width = max([len(header), *(len(row) for _, row in content)])
    return mend_decimal_comma(
        Grid(
            source.path,
            _pad(header, width),
            tuple(_pad(row, width) for _, row in content),
            tuple(n for n, _ in content),
            comments,
            (),
        )
    )


def _pad(row: tuple[str, ...], width: int) -> tuple[str, ...]:
    return row + ("",) * (width - len(row))


def _is_comment(row: tuple[str, ...]) -> bool:
    return next(cell for cell in row if cell).startswith("#")
