"""Rows of one table as sites and points, before files are joined."""

import math
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

from structmap.structure import one_letter
from structmap.values.conditions import Conditions, read_conditions
from structmap.values.errors import RepeatedRowError, UnreadableCellError
from structmap.values.grid import Grid
from structmap.values.headers import SiteRole
from structmap.values.layout import Layout, MeasuredColumn
from structmap.values.residues import (
    is_missing,
    parse_error,
    parse_number,
    parse_residue,
)

_SCALAR_X = 0.0  # stands for x where a quantity is one number a site


class SiteKey(NamedTuple):
    """What tells one measured site from another.

    Attributes
    ----------
    chain : str
    number : int
    ins_code : str
    atom : str
    """

    chain: str
    number: int
    ins_code: str
    atom: str

    def __str__(self) -> str:
        chain = f"{self.chain}/" if self.chain else ""
        atom = f"/{self.atom}" if self.atom else ""
        return f"{chain}{self.number}{self.ins_code}{atom}"


class SiteFacts(NamedTuple):
    """What a table says of a site besides.

    Attributes
    ----------
    comp : str
    group : str
    line : int
        Where it first stands.
    """

    comp: str
    group: str
    line: int


class Point(NamedTuple):
    """A measured number.

    Attributes
    ----------
    value : float
    error : float
        NaN where not given.
    """

    value: float
    error: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Series:
    """The points of one quantity.

    Attributes
    ----------
    name, unit : str
    is_profile : bool
        Whether x means anything.
    x_name, x_unit : str
        Blank for one number a site.
    points : dict
        Point by site and x.
    base : str
        Name without the conditions; blank where the table states none.
    conditions : Conditions
        Spinning rate and proton frequency.
    """

    name: str
    unit: str
    is_profile: bool
    x_name: str = ""
    x_unit: str = ""
    points: dict[tuple[SiteKey, float], Point] = field(default_factory=dict)
    base: str = ""
    conditions: Conditions = field(default_factory=Conditions)


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """One table, read.

    Attributes
    ----------
    path : Path
    sha256 : str
    sites : dict
        Facts by site, in the order of the table.
    series : tuple of Series
    notes : tuple of str
    """

    path: Path
    sha256: str
    sites: dict[SiteKey, SiteFacts]
    series: tuple[Series, ...]
    notes: tuple[str, ...]


def take_rows(grid: Grid, layout: Layout, *, sha256: str) -> Reading:
    """Turn the cells of a table into sites and points.

    Parameters
    ----------
    grid : Grid
        Cells of the table.
    layout : Layout
        What each column holds.
    sha256 : str
        Of the file.

    Returns
    -------
    Reading
        Sites and points.

    Raises
    ------
    UnreadableCellError
        If a cell does not hold what its column needs.
    RepeatedRowError
        If two rows give the same site and point.
    """
    identified = list(_identify(grid, layout))
    sites: dict[SiteKey, SiteFacts] = {}
    seen: dict[tuple[SiteKey, float, str], int] = {}
    series: dict[str, Series] = {}
    zeros: Counter[str] = Counter()
    if layout.quantity < 0 and not layout.conditions:
        for column in layout.measured:  # in the order of the header
            _series_of(series, layout, column, "", Conditions())
    for row, line, (key, facts) in zip(grid.rows, grid.lines, identified, strict=True):
        _keep_site(grid, sites, key, facts)
        x = _x_of_row(grid, layout, row, line)
        called = row[layout.quantity] if layout.quantity >= 0 else ""
        at_which = read_conditions(grid, layout.conditions, row, line)
        _refuse_repeated(grid, seen, (key, x, called + at_which.label), line)
        for column in layout.measured:
            point = _point(grid, column, row, line)
            if math.isnan(point.value):
                continue
            target = _series_of(series, layout, column, called, at_which)
            zeros[target.name] += point.error == 0
            at = (
                _SCALAR_X if not target.is_profile else x if layout.x >= 0 else column.x
            )
            target.points[key, at] = point._replace(error=point.error or math.nan)
    notes = [*grid.notes, *layout.notes]
    notes += [
        f"{grid.path.name}: {name} has {n} error{'s' * (n > 1)} of 0, "
        "taken as not given."
        for name, n in zeros.items()
        if n
    ]
    return Reading(
        path=grid.path,
        sha256=sha256,
        sites=sites,
        series=tuple(one for one in series.values() if one.points),
        notes=tuple(notes),
    )


def _identify(grid: Grid, layout: Layout) -> Iterator[tuple[SiteKey, SiteFacts]]:
    """Yield site and facts of each row."""
    column = layout.site["auth_seq_id"]
    numbers = [
        parse_residue(row[column], path=grid.path, row=line, column=grid.header[column])
        for row, line in zip(grid.rows, grid.lines, strict=True)
    ]
    letters = {number.comp for number in numbers if len(number.comp) == 1}
    chained = "auth_asym_id" in layout.site or any(number.chain for number in numbers)
    for number, row, line in zip(numbers, grid.rows, grid.lines, strict=True):
        if len(number.comp) == 1 and len(letters) < 3 and not chained:
            wanted = (
                "the letter may be a chain or an amino acid; write the number alone "
                "and the letter in a column chain or auth_comp_id"
            )
            cell, named = row[column], grid.header[column]
            raise UnreadableCellError(grid.path, line, named, cell, wanted)
        comp = _said(grid, layout, row, line, ("auth_comp_id", number.comp)).upper()
        key = SiteKey(
            _said(grid, layout, row, line, ("auth_asym_id", number.chain)),
            number.number,
            _said(grid, layout, row, line, ("pdbx_PDB_ins_code", number.ins_code)),
            _atom(layout, row, comp),
        )
        yield key, SiteFacts(comp, _text(layout, row, "group"), line)


def _atom(layout: Layout, row: tuple[str, ...], comp: str) -> str:
    """Return the atom; NA names one in a ligand (a haem has NA, NB, NC and ND)."""
    column = layout.site.get("atom", -1)
    of_ligand = len(comp) > 1 and one_letter(comp) == "X"
    if column >= 0 and row[column] == "NA" and of_ligand:
        return "NA"
    return _text(layout, row, "atom")


def _text(layout: Layout, row: tuple[str, ...], role: SiteRole) -> str:
    """Return the cell of a site column; a chain may be called NA."""
    column = layout.site.get(role, -1)
    cell = row[column] if column >= 0 else ""
    missing = cell in (".", "?") or (role != "auth_asym_id" and is_missing(cell))
    return "" if missing else cell


def _said(
    grid: Grid,
    layout: Layout,
    row: tuple[str, ...],
    line: int,
    inside: tuple[SiteRole, str],
) -> str:
    """Return a fact from its own column or from the cell of the number, not both."""
    role, written = inside
    own = _text(layout, row, role)
    if own and written and own.upper() != written.upper():
        column = grid.header[layout.site["auth_seq_id"]]
        cell = row[layout.site["auth_seq_id"]]
        wanted = f"the column of {role} says {own!r}; make them agree"
        raise UnreadableCellError(grid.path, line, column, cell, wanted)
    return own or written


def _keep_site(
    grid: Grid, sites: dict[SiteKey, SiteFacts], key: SiteKey, facts: SiteFacts
) -> None:
    """Note a site, whose name and group must be the same in all its rows."""
    known = sites.setdefault(key, facts)
    for what, old, new in (
        ("name", known.comp, facts.comp),
        ("group", known.group, facts.group),
    ):
        if old != new:
            wanted = f"row {known.line} gives {key} the {what} {old!r}; make them agree"
            raise UnreadableCellError(grid.path, facts.line, what, new, wanted)


def _x_of_row(grid: Grid, layout: Layout, row: tuple[str, ...], line: int) -> float:
    if layout.x < 0:
        return _SCALAR_X
    column = grid.header[layout.x]
    x = parse_number(row[layout.x], path=grid.path, row=line, column=column)
    if math.isnan(x):
        wanted = "write the x of this point, or remove the row"
        raise UnreadableCellError(grid.path, line, column, row[layout.x], wanted)
    return x


def _refuse_repeated(
    grid: Grid,
    seen: dict[tuple[SiteKey, float, str], int],
    point: tuple[SiteKey, float, str],
    line: int,
) -> None:
    first = seen.setdefault(point, line)
    if first != line:
        at = f" at x = {point[1]:g}" if any(x != _SCALAR_X for _, x, _ in seen) else ""
        raise RepeatedRowError(grid.path, (first, line), f"site {point[0]}{at}")


def _point(
    grid: Grid, column: MeasuredColumn, row: tuple[str, ...], line: int
) -> Point:
    name = grid.header[column.value]
    value = parse_number(row[column.value], path=grid.path, row=line, column=name)
    if column.error < 0:
        return Point(value, math.nan)
    name = grid.header[column.error]
    error = parse_error(row[column.error], path=grid.path, row=line, column=name)
    return Point(value, error)


def _series_of(
    series: dict[str, Series],
    layout: Layout,
    column: MeasuredColumn,
    called: str,
    conditions: Conditions,
) -> Series:
    """Return the series of a column, made when it is met first."""
    base = called or column.series
    name = base + conditions.label
    is_profile = column.series in layout.x_name
    if name not in series:
        series[name] = Series(
            name=name,
            unit=column.unit,
            is_profile=is_profile,
            x_name=layout.x_name.get(column.series, ""),
            x_unit=layout.x_unit.get(column.series, ""),
            base=base if conditions.label else "",
            conditions=conditions,
        )
    return series[name]
