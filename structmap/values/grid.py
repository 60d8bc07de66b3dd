"""A table of values as plain cells: text of any separator, or a binary table."""

import csv
import gzip
import hashlib
import re
import zlib
from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from structmap.errors import FileProblemError
from structmap.values.errors import (
    NoSiteColumnError,
    RaggedRowError,
    UnclearColumnsError,
)
from structmap.values.headers import NUMBER_NAMES, find_column
from structmap.values.residues import is_residue_number

SEPARATORS = {"\t": "tab", ";": "semicolon", ",": "comma", " ": "spaces"}
_CONTROL_BYTES = re.compile(rb"[\x00-\x08\x0e-\x19\x1b-\x1f]")
_DECIMAL_COMMA = re.compile(r"[+\-−]?\d*,\d+([eE][+-]?\d+)?")
_DECIMAL_POINT = re.compile(r"[+\-−]?\d*\.\d+([eE][+-]?\d+)?")
_BINARY_KINDS = (
    (b"PK\x03\x04", "sheet"),
    (b"PAR1", "parquet"),
    (b"\xd0\xcf\x11\xe0", "an old Excel or other Office file"),
    (b"%PDF", "a PDF"),
    (b"\x89PNG", "a picture"),
)


@dataclass(frozen=True, slots=True)
class Source:
    """A file's bytes, unpacked.

    Attributes
    ----------
    path : Path
    sha256 : str
        SHA-256 of the bytes as they lie on disk.
    content : bytes
        The bytes, unpacked when they were gzipped.
    """

    path: Path
    sha256: str
    content: bytes


@dataclass(frozen=True, slots=True)
class Grid:
    """The cells of a table.

    Attributes
    ----------
    path : Path
        The file, for messages.
    header : tuple of str
        Column names.
    rows : tuple of tuple of str
        Cells, as many in each row as there are columns.
    lines : tuple of int
        Line of the file, or row of the sheet, of each row.
    comments : tuple of str
        Comment lines without their mark.
    notes : tuple of str
        What was recognised, one sentence each.
    """

    path: Path
    header: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    lines: tuple[int, ...]
    comments: tuple[str, ...]
    notes: tuple[str, ...]


def read_source(path: Path) -> Source:
    """Read the bytes of a file, unpacking gzip.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    Source
        Its bytes, unpacked.

    Raises
    ------
    FileProblemError
        If there is no such file, it cannot be read, is empty or is cut short.
    """
    if path.is_dir():
        raise FileProblemError(path, "is a folder", "name the file of values in it")
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        raise FileProblemError(
            path, "there is no such file", "check its name"
        ) from None
    except OSError as error:
        problem = f"cannot be read ({error.strerror})"
        raise FileProblemError(path, problem, "check its permissions") from error
    sha256 = hashlib.sha256(content).hexdigest()
    if content.startswith(b"\x1f\x8b"):
        try:
            content = gzip.decompress(content)
        except (EOFError, OSError, zlib.error) as error:
            problem = "is a damaged or truncated gzip file"
            raise FileProblemError(path, problem, "fetch or make it again") from error
    if not content.strip():
        raise FileProblemError(path, "is empty", "give a table of measured values")
    return Source(path, sha256, content)


def binary_kind(source: Source) -> str:
    """Return what a binary file is: ``sheet``, ``parquet``, or blank for text.

    Parameters
    ----------
    source : Source
        The file, as bytes.

    Returns
    -------
    str
        ``sheet``, ``parquet`` or blank.

    Raises
    ------
    FileProblemError
        If it is binary and none of these.
    """
    kind = next(
        (kind for mark, kind in _BINARY_KINDS if source.content.startswith(mark)), ""
    )
    if kind in ("sheet", "parquet"):
        return kind
    wide = source.content.startswith((b"\xff\xfe", b"\xfe\xff"))
    if kind or (not wide and _CONTROL_BYTES.search(source.content[:65536])):
        problem = f"is {kind or 'a binary file'}, not a table"
        raise FileProblemError(source.path, problem, "save it as CSV or .xlsx")
    return ""


def read_text(
    source: Source, columns: Sequence[str], *, keys: Collection[str] = NUMBER_NAMES
) -> Grid:
    """Split a text table into cells, recognising separator, header and decimal comma.

    Parameters
    ----------
    source : Source
        The file, as bytes.
    columns : sequence of str
        Names of the columns of a table without a header; empty when it has one.
    keys : collection of str
        Names of a column that must be there, by which the header is known.

    Returns
    -------
    Grid
        Its cells.

    Raises
    ------
    FileProblemError
        If it holds nothing but comments.
    NoSiteColumnError
        If no column gives the residue number.
    RaggedRowError
        If a row has fewer or more cells than the header.
    UnclearColumnsError
        If decimal points and decimal commas are mixed.
    """
    text, notes = _decode(source)
    numbered = [
        (n, line) for n, line in enumerate(_lines(text), 1) if line.strip(" \t\x1a")
    ]
    comments = [(n, line) for n, line in numbered if line.lstrip().startswith("#")]
    content = [(n, line) for n, line in numbered if not line.lstrip().startswith("#")]
    if not content:
        remedy = "give a table of measured values"
        raise FileProblemError(source.path, "holds nothing but comments", remedy)
    stripped = tuple(line.lstrip().lstrip("#").strip() for _, line in comments)
    if columns:
        separator, header, rows = _named_columns(source.path, content, columns, keys)
    else:
        separator, header, rows = _find_header(source.path, content, stripped, keys)
    notes.append(f"{source.path.name}: columns are parted by {SEPARATORS[separator]}.")
    cells = [(n, split_line(line, separator)) for n, line in rows]
    grid = Grid(
        source.path,
        header,
        tuple(_fit(source.path, n, row, len(header)) for n, row in cells),
        tuple(n for n, _ in cells),
        stripped,
        tuple(notes),
    )
    return mend_decimal_comma(grid)


def split_line(line: str, separator: str) -> tuple[str, ...]:
    """Return the cells of one line, without quotes and surrounding blanks.

    Parameters
    ----------
    line : str
        Text of the line.
    separator : str
        A blank stands for any run of blanks and tabs.

    Returns
    -------
    tuple of str
        The cells.
    """
    if separator == " ":
        reader = csv.reader([" ".join(line.split())], delimiter=" ")
    else:
        reader = csv.reader([line], delimiter=separator, skipinitialspace=True)
    return tuple(cell.strip() for cell in next(reader, []))


def mend_decimal_comma(grid: Grid) -> Grid:
    """Turn decimal commas into points, and say so.

    Parameters
    ----------
    grid : Grid
        Cells of the table.

    Returns
    -------
    Grid
        With decimal points only.

    Raises
    ------
    UnclearColumnsError
        If some numbers have a comma and others a point.
    """
    comma = {c for row in grid.rows for c, cell in enumerate(row) if _is_comma(cell)}
    if not comma:
        return grid
    point = {c for row in grid.rows for c, cell in enumerate(row) if _is_point(cell)}
    if point:
        named = tuple(grid.header[c] for c in sorted(comma | point))
        problem = "mix decimal commas with decimal points"
        raise UnclearColumnsError(grid.path, named, problem, "write all with points")
    rows = tuple(
        tuple(cell.replace(",", ".") if _is_comma(cell) else cell for cell in row)
        for row in grid.rows
    )
    note = f"{grid.path.name}: decimal commas were read as decimal points."
    return Grid(
        grid.path, grid.header, rows, grid.lines, grid.comments, (*grid.notes, note)
    )


def _is_comma(cell: str) -> bool:
    return _DECIMAL_COMMA.fullmatch(cell) is not None


def _is_point(cell: str) -> bool:
    return _DECIMAL_POINT.fullmatch(cell) is not None


def _decode(source: Source) -> tuple[str, list[str]]:
    """Return the text and a note where the encoding had to be guessed."""
    if source.content.startswith((b"\xff\xfe", b"\xfe\xff")):
        try:
            return source.content.decode("utf-16"), []
        except UnicodeDecodeError as error:
            problem = "is damaged UTF-16 text"
            raise FileProblemError(source.path, problem, "save it as UTF-8") from error
    try:
        return source.content.decode("utf-8-sig"), []
    except UnicodeDecodeError:
        note = f"{source.path.name}: not UTF-8, read as Latin-1."
        return source.content.decode("latin-1"), [note]


def _lines(text: str) -> list[str]:
    return text.replace("\r\n", "\n").replace("\r", "\n").split("\n")


_Lines = list[tuple[int, str]]


def _find_header(
    path: Path, content: _Lines, comments: tuple[str, ...], keys: Collection[str]
) -> tuple[str, tuple[str, ...], _Lines]:
    """Return the separator, the column names and the lines of data."""
    for separator, header in _headers(content[0][1]):
        if find_column(header, keys) >= 0:
            return separator, header, content[1:]
    # Some programs write the header as the last comment above the data.
    for comment in reversed(comments):
        for separator, header in _headers(comment):
            site = find_column(header, keys)
            first = split_line(content[0][1], separator)
            if site < 0 or len(first) != len(header):
                continue
            if is_residue_number(first[site]):
                return separator, header, content
    found = max((header for _, header in _headers(content[0][1])), key=len)
    raise NoSiteColumnError(path, found)


def _headers(line: str) -> Iterator[tuple[str, tuple[str, ...]]]:
    for separator in SEPARATORS:
        cells = split_line(line, separator)
        yield separator, _with_units(cells) if separator == " " else cells


def _with_units(cells: tuple[str, ...]) -> tuple[str, ...]:
    """Join a unit in brackets to the name before it (``R1 [s-1]``)."""
    out: list[str] = []
    for cell in cells:
        if out and cell.startswith(("[", "(")):
            out[-1] += f" {cell}"
        else:
            out.append(cell)
    return tuple(out)


def _named_columns(
    path: Path, content: _Lines, columns: Sequence[str], keys: Collection[str]
) -> tuple[str, tuple[str, ...], _Lines]:
    """Return the separator under which the columns fit; skip a header line."""
    header, site = tuple(columns), find_column(columns, keys)
    if site < 0:
        raise NoSiteColumnError(path, header)
    widths: list[int] = []
    for separator in SEPARATORS:
        cells = [split_line(line, separator) for _, line in content[:2]]
        widths.append(len(cells[0]))
        numbers = [len(row) > site and is_residue_number(row[site]) for row in cells]
        if len(cells[-1]) < len(header) or not any(numbers):
            continue
        return separator, header, content if numbers[0] else content[1:]
    if max(widths) < len(header):
        raise RaggedRowError(path, content[0][0], max(widths), len(header))
    raise NoSiteColumnError(path, header)


def _fit(path: Path, line: int, cells: tuple[str, ...], width: int) -> tuple[str, ...]:
    """Return as many cells as there are columns; blank surplus cells are dropped."""
    if len(cells) < width or any(cells[width:]):
        raise RaggedRowError(path, line, len(cells), width)
    return cells[:width]
