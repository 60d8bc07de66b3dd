"""Columns that say under which conditions a point of a profile was measured."""

import math
import re
from dataclasses import dataclass
from typing import NamedTuple

from structmap.values.errors import UnclearColumnsError, UnreadableCellError
from structmap.values.grid import Grid
from structmap.values.headers import split_unit
from structmap.values.residues import parse_number

_SPINNING = ("mas", "mas_rate", "mas_frequency", "spinning_rate", "spinning_frequency")
_PROTON = (
    *("proton_frequency", "larmor_frequency", "spectrometer_frequency"),
    "spectrometer_frequency_1h",
)
_HERTZ = {"hz": 1.0, "hertz": 1.0, "khz": 1e3, "kilohertz": 1e3}
_MEGAHERTZ = {"mhz": 1.0, "megahertz": 1.0, "hz": 1e-6, "ghz": 1e3}


class Conditions(NamedTuple):
    """Conditions of a point; 0 where the table says nothing.

    Attributes
    ----------
    mas_rate_hertz : float
        Rate of magic-angle spinning.
    proton_frequency_megahertz : float
        Larmor frequency of the protons.
    """

    mas_rate_hertz: float = 0.0
    proton_frequency_megahertz: float = 0.0

    @property
    def label(self) -> str:
        """Return what follows the name of a quantity measured so.

        Returns
        -------
        str
            For example ``_60kHzMAS_600MHz``; blank without conditions.
        """
        parts = []
        if self.mas_rate_hertz > 0:
            parts.append(f"_{self.mas_rate_hertz / 1e3:g}kHzMAS")
        if self.proton_frequency_megahertz > 0:
            parts.append(f"_{self.proton_frequency_megahertz:g}MHz")
        return "".join(parts)


@dataclass(frozen=True, slots=True)
class ConditionColumn:
    """A column of conditions.

    Attributes
    ----------
    field : str
        Name of the field of `Conditions`.
    column : int
        Index of the column.
    factor : float
        Turns its numbers into the unit of the field.
    """

    field: str
    column: int
    factor: float


def find_condition_columns(grid: Grid, free: list[int]) -> tuple[ConditionColumn, ...]:
    """Return the columns that hold spinning rates and proton frequencies.

    Parameters
    ----------
    grid : Grid
        Cells of the table.
    free : list of int
        Columns to look at.

    Returns
    -------
    tuple of ConditionColumn
        At most one of each kind.

    Raises
    ------
    UnclearColumnsError
        If two columns claim the same, or one has no unit that fits.
    """
    found: dict[str, ConditionColumn] = {}
    for column in free:
        kind = _kind_of(grid.header[column])
        if kind is None:
            continue
        field, unit, units = kind
        named = (grid.header[column],)
        if unit.lower() not in units:
            problem = f"has {f'the unit {unit!r}' if unit else 'no unit'}"
            remedy = "write it in brackets: mas_rate [kHz], proton_frequency [MHz]"
            raise UnclearColumnsError(grid.path, named, problem, remedy)
        if field in found:
            both = (grid.header[found[field].column], *named)
            remedy = "keep one of them"
            raise UnclearColumnsError(grid.path, both, "say the same", remedy)
        found[field] = ConditionColumn(field, column, units[unit.lower()])
    return tuple(found.values())


def _kind_of(header: str) -> tuple[str, str, dict[str, float]] | None:
    name, unit = split_unit(header)
    plain = re.sub(r"[ \-]+", "_", name.strip().lower())
    ending = re.fullmatch(r"(.*)_(hz|khz|mhz|ghz|hertz|kilohertz|megahertz)", plain)
    if ending and not unit:
        plain, unit = ending[1], ending[2]
    if plain in _SPINNING:
        return "mas_rate_hertz", unit, _HERTZ
    if plain in _PROTON:
        return "proton_frequency_megahertz", unit, _MEGAHERTZ
    return None


def read_conditions(
    grid: Grid, columns: tuple[ConditionColumn, ...], row: tuple[str, ...], line: int
) -> Conditions:
    """Return the conditions of a row.

    Parameters
    ----------
    grid : Grid
        The table.
    columns : tuple of ConditionColumn
        Where they stand.
    row : tuple of str
        Its cells.
    line : int
        Its number.

    Returns
    -------
    Conditions
        In the units of the record.

    Raises
    ------
    UnreadableCellError
        If a cell is blank or not above 0.
    """
    read: dict[str, float] = {}
    for one in columns:
        cell, name = row[one.column], grid.header[one.column]
        number = parse_number(cell, path=grid.path, row=line, column=name)
        if math.isnan(number) or number <= 0:
            wanted = "write a number above 0, or remove the row"
            raise UnreadableCellError(grid.path, line, name, cell, wanted)
        read[one.field] = number * one.factor
    return Conditions(**read)
