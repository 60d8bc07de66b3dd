"""Which column of a table holds what."""

import math
import re
from collections import Counter, defaultdict
from dataclasses import dataclass

from structmap.errors import FileProblemError
from structmap.values.conditions import ConditionColumn, find_condition_columns
from structmap.values.errors import (
    NoQuantityError,
    NoSiteColumnError,
    UnclearColumnsError,
)
from structmap.values.grid import Grid
from structmap.values.headers import (
    ColumnName,
    SiteRole,
    site_role,
    split_name,
    split_unit,
)
from structmap.values.residues import holds_a_number, is_missing

_SKIPPED = "-"
_SINGLE_X = math.nan  # the x of a column that is no point of a profile


@dataclass(frozen=True, slots=True)
class MeasuredColumn:
    """A column of measured values.

    Attributes
    ----------
    series : str
        Name of the quantity that it belongs to.
    unit : str
        Of its values; blank when not stated.
    x : float
        Point of a profile that the header names; NaN when it names none.
    value : int
        Index of the column.
    error : int
        Index of the column of its errors, -1 without one.
    """

    series: str
    unit: str
    x: float
    value: int
    error: int


@dataclass(frozen=True, slots=True)
class Layout:
    """Which column of a table holds what.

    Attributes
    ----------
    site : dict of str to int
        Column of each thing that is said of the site.
    measured : tuple of MeasuredColumn
    x : int
        Column of x in a long table, -1 in a wide one.
    x_name, x_unit : dict of str to str
        For each series that is a profile.
    quantity : int
        Column of a long table that names the quantity, -1 without one.
    notes : tuple of str
    conditions : tuple of ConditionColumn
        Columns of spinning rates and proton frequencies.
    """

    site: dict[SiteRole, int]
    measured: tuple[MeasuredColumn, ...]
    x: int
    x_name: dict[str, str]
    x_unit: dict[str, str]
    quantity: int
    notes: tuple[str, ...]
    conditions: tuple[ConditionColumn, ...] = ()


def find_layout(grid: Grid) -> Layout:
    """Find what each column of a table holds, by the header.

    Parameters
    ----------
    grid : Grid
        Cells of the table.

    Returns
    -------
    Layout
        What each column holds.

    Raises
    ------
    FileProblemError
        If there is a header and no row.
    NoSiteColumnError
        If no column gives the residue number.
    NoQuantityError
        If no column holds measured values.
    UnclearColumnsError
        If columns can be taken in more than one way.
    """
    if not grid.rows:
        problem = "has column names and no rows"
        raise FileProblemError(grid.path, problem, "give a row for each measured site")
    notes: list[str] = []
    site = _site_columns(grid)
    free = [c for c in range(len(grid.header)) if c not in site.values()]
    free = [c for c in free if grid.header[c] != _SKIPPED]
    x, quantity = _long_columns(grid, free)
    conditions = find_condition_columns(grid, free)
    free = [c for c in free if c not in (x, quantity, *(k.column for k in conditions))]
    kept = [c for c in free if _is_measured(grid, c, notes)]
    names = _without_lonely_errors(grid, kept, [c for c in free if c not in kept])
    values = [c for c in names if not names[c].is_error]
    if not values:
        raise NoQuantityError(grid.path, grid.header)
    errors = _pair_errors(grid, names)
    points = (
        {} if x >= 0 else _profile_points(grid, {c: names[c] for c in values}, notes)
    )
    commented = _commented_units(grid.comments)
    measured = tuple(
        _measured_column(grid, column, names, errors, points, commented)
        for column in values
    )
    x_name, x_unit = _describe_x(grid, x, measured, {c: names[c] for c in points})
    said = tuple(notes)
    return Layout(site, measured, x, x_name, x_unit, quantity, said, conditions)


def _site_columns(grid: Grid) -> dict[SiteRole, int]:
    claims: dict[SiteRole, list[int]] = defaultdict(list)
    for column, name in enumerate(grid.header):
        role = site_role(name)
        if role is not None:
            claims[role].append(column)
    _settle_names(grid, claims)
    for columns in claims.values():
        if len(columns) > 1:
            named = tuple(grid.header[c] for c in columns)
            remedy = "keep one of them"
            raise UnclearColumnsError(
                grid.path, named, "say the same of a site", remedy
            )
    if "auth_seq_id" not in claims:
        raise NoSiteColumnError(grid.path, grid.header)
    return {role: columns[0] for role, columns in claims.items()}


def _settle_names(grid: Grid, claims: dict[SiteRole, list[int]]) -> None:
    """Take `residue` for the residue's name where another column has the number."""
    numbers = claims["auth_seq_id"]
    letters = [c for c in numbers if all(row[c].isalpha() for row in grid.rows)]
    if len(numbers) == 2 and len(letters) == 1 and "auth_comp_id" not in claims:
        numbers.remove(letters[0])
        claims["auth_comp_id"].append(letters[0])
    if not numbers:
        del claims["auth_seq_id"]


def _long_columns(grid: Grid, free: list[int]) -> tuple[int, int]:
    """Return the columns of x and of the quantity's name, -1 where there is none."""
    plain = {c: split_unit(grid.header[c])[0].lower() for c in free}
    xs = [c for c in free if plain[c] == "x" or re.match(r"x ?=", plain[c])]
    if len(xs) > 1:
        named = tuple(grid.header[c] for c in xs)
        raise UnclearColumnsError(
            grid.path, named, "all claim to be x", "keep one of them"
        )
    quantities = [c for c in free if plain[c] == "quantity"]
    return (xs[0] if xs else -1), (quantities[0] if quantities else -1)


def _is_measured(grid: Grid, column: int, notes: list[str]) -> bool:
    """Return whether a column holds any number; say which were left out."""
    name = grid.header[column]
    cells = [row[column] for row in grid.rows]
    if name and any(holds_a_number(cell) for cell in cells):
        return True
    if all(is_missing(cell) for cell in cells) and (
        not name or split_name(name).is_error
    ):  # a blank error column means that the errors are not given
        return bool(name)
    called = (
        f"column {name!r} holds no numbers and" if name else "a column without a name"
    )
    notes.append(f"{grid.path.name}: {called} was left out.")
    return False


def _without_lonely_errors(
    grid: Grid, kept: list[int], left_out: list[int]
) -> dict[int, ColumnName]:
    """Return the names of the columns kept, less errors of values left out."""
    blank = {_named(grid, column).name for column in left_out if grid.header[column]}
    named = {column: _named(grid, column) for column in kept}
    return {
        column: name
        for column, name in named.items()
        if not (name.is_error and name.name and name.name in blank)
    }


def _named(grid: Grid, column: int) -> ColumnName:
    """Return the parts of a column's name; ``value=R1rho`` names its quantity."""
    parts = split_name(grid.header[column])
    given = re.fullmatch(r"value ?= ?(.+)", parts.name, re.IGNORECASE)
    if given:
        return parts._replace(name=given[1], stem=given[1], x=None, x_unit="")
    return parts


def _pair_errors(grid: Grid, names: dict[int, ColumnName]) -> dict[int, int]:
    """Return the column of errors of each column of values that has one.

    A bare ``error`` belongs to the column of values before it.
    """
    values: dict[str, int] = {}
    for column, name in names.items():
        if name.is_error:
            continue
        if name.name in values:
            named = (grid.header[values[name.name]], grid.header[column])
            remedy = "give each its own name"
            raise UnclearColumnsError(grid.path, named, "have the same name", remedy)
        values[name.name] = column
    errors: dict[int, int] = {}
    for column, name in names.items():
        if not name.is_error:
            continue
        owner = (
            values.get(name.name, -1) if name.name else _column_before(column, values)
        )
        if owner < 0 or owner in errors:
            problem = (
                "belongs to no column of values" if owner < 0 else "repeats an error"
            )
            remedy = "call it NAME_error after the column NAME, or skip it"
            raise UnclearColumnsError(
                grid.path, (grid.header[column],), problem, remedy
            )
        unit = names[owner].unit
        if name.unit and unit and name.unit != unit:
            named = (grid.header[owner], grid.header[column])
            remedy = "give values and errors in one unit"
            raise UnclearColumnsError(grid.path, named, "differ in unit", remedy)
        errors[owner] = column
    return errors


def _column_before(column: int, values: dict[str, int]) -> int:
    return max((c for c in values.values() if c < column), default=-1)


def _profile_points(
    grid: Grid, names: dict[int, ColumnName], notes: list[str]
) -> dict[int, float]:
    """Return x of the columns that are points of a profile, by their header.

    Three columns or more that differ in a number with a unit of x are points of one
    profile; without a unit that cannot be told, and the user is asked.
    """
    stems: dict[str, list[int]] = defaultdict(list)
    for column, name in names.items():
        if name.x is not None:
            stems[name.stem].append(column)
    points: dict[int, float] = {}
    for stem, columns in stems.items():
        units = {names[c].x_unit for c in columns}
        named = tuple(grid.header[c] for c in columns)
        if len(columns) < 3:
            continue
        if (
            len(units) > 1
            or "" in units
            or stem in {name.name for name in names.values()}
        ):
            raise UnclearColumnsError(
                grid.path,
                named,
                "look like points of one profile, and their unit of x is not plain",
                f"call them {stem}_5kHz and so on if they are, else let no name end in "
                "a number after an underscore",
            )
        points.update({c: names[c].x or 0.0 for c in columns})
        if max(Counter(points[c] for c in columns).values()) > 1:
            remedy = "keep one of them"
            raise UnclearColumnsError(
                grid.path, named, "repeat a point of a profile", remedy
            )
        notes.append(
            f"{grid.path.name}: the {len(columns)} columns {named[0]} to {named[-1]} "
            f"were recognised by their names as one profile of {stem}, "
            f"x in {units.pop()}."
        )
    return points


def _measured_column(
    grid: Grid,
    column: int,
    names: dict[int, ColumnName],
    errors: dict[int, int],
    points: dict[int, float],
    commented: dict[str, str],
) -> MeasuredColumn:
    name = names[column]
    series = name.stem if column in points else name.name
    error = errors.get(column, -1)
    unit = name.unit or (names[error].unit if error >= 0 else "")
    unit = unit or commented.get(series, commented.get(grid.header[column], ""))
    return MeasuredColumn(
        series,
        unit or commented.get("", ""),
        points.get(column, _SINGLE_X),
        column,
        error,
    )


def _commented_units(comments: tuple[str, ...]) -> dict[str, str]:
    """Return the units of ``# units R1 = s-1, NOE = none``; blank stands for all."""
    units: dict[str, str] = {}
    for comment in comments:
        found = re.fullmatch(r"units?\b\s*[:=]?\s*(.+)", comment, re.IGNORECASE)
        for part in re.split(r"[,;]", found[1]) if found else ():
            pair = re.fullmatch(r"\s*(.*?)\s*(?:[:=]|\s)\s*(\S+)\s*", part)
            if pair:
                units[pair[1]] = pair[2]
            elif part.strip():
                units[""] = part.strip()
    return units


def _describe_x(
    grid: Grid,
    x: int,
    measured: tuple[MeasuredColumn, ...],
    points: dict[int, ColumnName],
) -> tuple[dict[str, str], dict[str, str]]:
    """Return name and unit of x for each series that is a profile."""
    if x >= 0:
        name, unit = split_unit(grid.header[x])
        name = re.sub(r"^x ?= ?", "", name, flags=re.IGNORECASE)
        unit = unit or _commented_units(grid.comments).get("x", "")
        series = {column.series for column in measured}
        return dict.fromkeys(series, name), dict.fromkeys(series, unit)
    profiles = [column for column in measured if column.value in points]
    return (
        {column.series: "x" for column in profiles},
        {column.series: points[column.value].x_unit for column in profiles},
    )
