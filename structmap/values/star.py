"""NMR-STAR 3 and NEF files: relaxation, order, exchange with the solvent, shifts.

Tag names are those of the NMR-STAR 3 dictionary and of NEF 1.1.
"""

import math
import re
from collections import Counter, defaultdict
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any, NamedTuple

from structmap.errors import FileProblemError, MissingExtraError
from structmap.values.conditions import Conditions
from structmap.values.errors import RepeatedRowError, UnreadableCellError
from structmap.values.grid import Source
from structmap.values.headers import ColumnName, split_name
from structmap.values.reading import Point, Reading, Series, SiteFacts, SiteKey
from structmap.values.residues import is_residue_number, parse_error, parse_number

_BLANK = ("", ".", "?", "None")
# Seconds in a unit, and whether it is one of time or of rate.
_UNITS = {
    "s": (1.0, "time"),
    "ms": (1e-3, "time"),
    "us": (1e-6, "time"),
    "min": (60.0, "time"),
    "hr": (3600.0, "time"),
    "s-1": (1.0, "rate"),
    "ms-1": (1e-3, "rate"),
    "us-1": (1e-6, "rate"),
    "min-1": (60.0, "rate"),
    "hr-1": (3600.0, "rate"),
}
_BACKBONE = ("H", "N", "C", "CA", "CB", "HA")


class Kind(NamedTuple):
    """A kind of list.

    Attributes
    ----------
    loop : str
        Category of the loop.
    name : str
        What the quantity is called.
    value, error : str
        Tags of the loop.
    units : str
        Tag of the save frame; blank where the numbers have no unit.
    site : str
        What follows the tags of the site: ``_1`` where a row names two atoms.
    """

    loop: str
    name: str
    value: str
    error: str
    units: str = ""
    site: str = ""


KINDS = (
    Kind("_T1", "R1", "Val", "Val_err", "T1_val_units"),
    Kind("_T2", "R2", "T2_val", "T2_val_err", "T2_val_units"),
    Kind("_T1rho", "R1rho", "T1rho_val", "T1rho_val_err", "T1rho_val_units"),
    Kind("_Heteronucl_NOE", "NOE", "Val", "Val_err", site="_1"),
    Kind("_Order_param", "S2", "Order_param_val", "Order_param_val_fit_err"),
    Kind("_H_exch_rate", "kex", "Val", "Val_err", "Val_units"),
    Kind("_H_exch_protection_factor", "protection_factor", "Val", "Val_err"),
)
_FIELD_LOOPS, _LEAST_POINTS = ("_T1rho", "_T2"), 3
_SHIFTS = Kind("_Atom_chem_shift", "shift", "Val", "Val_err")


@dataclass(frozen=True, slots=True)
class StarRow:
    """A row of a loop.

    Attributes
    ----------
    number : int
        Counted from 1 in its loop.
    cells : dict of str to str
        By tag; blank where the file has nothing.
    """

    number: int
    cells: dict[str, str]


@dataclass(frozen=True, slots=True)
class StarList:
    """A loop of values with the save frame around it.

    Attributes
    ----------
    kind : Kind
    frame : str
        Name of the save frame.
    tags : dict of str to str
        Of the save frame.
    rows : tuple of StarRow
    """

    kind: Kind
    frame: str
    tags: dict[str, str]
    rows: tuple[StarRow, ...]


def read_star(source: Source) -> Reading:
    """Read the values of an NMR-STAR or NEF file.

    Three or more lists of R1rho or R2 at one proton frequency, whose save frames are
    named by the field (``R1rho_20kHz``, ``R2_100Hz``), are points of one profile, for
    the dictionary has no tag for the strength of a spin lock. Times are turned into
    rates in s-1; quantities of several fields carry the proton
    frequency in their names (``R1_600MHz``). Chemical shifts are read where a file has
    nothing else: those of the backbone and of CB, one quantity an atom (``shift_N``).

    Parameters
    ----------
    source : Source
        The file, as bytes.

    Returns
    -------
    Reading
        Numbered by Seq_ID.

    Raises
    ------
    MissingExtraError
        If pynmrstar is not installed.
    FileProblemError
        If the file is damaged, holds no list of values, several molecules, or a list
        without its unit.
    UnreadableCellError
        If a value is no number, or an error is negative.
    RepeatedRowError
        If a list gives a site twice.
    """
    frames = _frames(source)
    lists = [one for kind in KINDS for one in _lists(frames, kind)]
    apart: list[str] = []
    if lists:
        rates = [(one, _rates(source, one)) for one in lists]
        series = list(_join_points(rates, apart))
    else:
        lists = _lists(frames, _SHIFTS) + _nef_lists(frames)
        series = [
            part for one in lists for part in _shifts(source, one, len(lists) > 1)
        ]
    series = [one for one in series if one.points]
    if not series:
        problem = "holds no relaxation, order, exchange or shift values"
        raise FileProblemError(source.path, problem, "give a table of values instead")
    sites: dict[SiteKey, SiteFacts] = {}
    for one in lists:
        for row in one.rows:
            key = _site(one.kind, row)
            if key is not None:
                comp = row.cells.get(f"Comp_ID{one.kind.site}", "").upper()
                sites.setdefault(key, SiteFacts(comp, "", row.number))
    return Reading(
        path=source.path,
        sha256=source.sha256,
        sites=dict(sorted(sites.items())),
        series=tuple(_distinct(series)),
        notes=(
            *_notes(source, lists, series),
            *(f"{source.path.name}: {note}" for note in apart),
        ),
    )


def _frames(source: Source) -> list[Any]:
    """Return the save frames of a file, or of a fragment of one."""
    try:
        import pynmrstar  # noqa: PLC0415 - an extra
    except ImportError:
        raise MissingExtraError(
            f"Reading {source.path.name}", "pynmrstar", "nmrstar"
        ) from None
    text = source.content.decode("utf-8-sig", errors="replace").replace("\r\n", "\n")
    if not any(line.strip().lower().startswith("data_") for line in text.split("\n")):
        text = f"data_fragment\n{text}\n"
    try:
        return list(pynmrstar.Entry.from_string(text).frame_list)
    except (pynmrstar.exceptions.ParsingError, ValueError) as error:
        raise FileProblemError(source.path, *_fault(error, text)) from error


def _fault(error: Exception, text: str) -> tuple[str, str]:
    """Return what is wrong with a file and what to do, in the reader's words."""
    repeated = re.search(r"saveframe with name '([^']*)' since", str(error))
    if repeated:
        name = repeated[1]
        lines = [
            n for n, line in enumerate(text.split("\n"), 1) if line == f"save_{name}"
        ]
        where = f" (lines {lines[0]} and {lines[1]})" if len(lines) > 1 else ""
        return f"has two save frames called {name}{where}", "give each its own name"
    what = " ".join(str(getattr(error, "message", error)).split())
    sentence = what.split(". ")[0].rstrip(".")
    line = getattr(error, "line_number", None)
    where = f"line {line}: " if line else ""
    problem = f"is a broken or truncated NMR-STAR file ({where}{sentence})"
    return problem, "mend it there, or fetch it again"


def _lists(frames: list[Any], kind: Kind) -> list[StarList]:
    found: list[StarList] = []
    for frame in frames:
        tags = {str(tag): _text(value) for tag, value in frame.tags}
        for loop in frame.loops:
            if loop.category == kind.loop:
                rows = tuple(
                    StarRow(n, dict(zip(loop.tags, map(_text, row), strict=True)))
                    for n, row in enumerate(loop.data, 1)
                )
                found.append(StarList(kind, str(frame.name), tags, rows))
    return found


def _nef_lists(frames: list[Any]) -> list[StarList]:
    """Return the shift lists of a NEF file under the tags of NMR-STAR."""
    renamed = {
        "chain_code": "Chain",
        "sequence_code": "Seq_ID",
        "residue_name": "Comp_ID",
        "atom_name": "Atom_ID",
        "value": "Val",
        "value_uncertainty": "Val_err",
    }
    kind = Kind("_nef_chemical_shift", "shift", "value", "value_uncertainty")
    return [
        replace(
            one,
            kind=_SHIFTS,
            rows=tuple(
                StarRow(
                    row.number,
                    {new: row.cells.get(old, "") for old, new in renamed.items()},
                )
                for row in one.rows
            ),
        )
        for one in _lists(frames, kind)
    ]


def _text(value: object) -> str:
    text = str(value).strip()
    return "" if text in _BLANK else text


def _site(kind: Kind, row: StarRow) -> SiteKey | None:
    """Return the site of a row; None where it is not assigned to a residue.

    The amide stands for the residue, and so does an atom left blank; shifts are told
    apart by their quantity.
    """
    number = row.cells.get(f"Seq_ID{kind.site}", "")
    number = number or row.cells.get(f"Comp_index_ID{kind.site}", "")
    chain = row.cells.get("Chain", "")
    if not is_residue_number(number) or not number.lstrip("-").isdigit():
        return None
    if chain.startswith(("@", "#")):  # NEF: not assigned
        return None
    atom = row.cells.get(f"Atom_ID{kind.site}", "")
    whole = kind == _SHIFTS or atom in ("N", "H")
    return SiteKey(chain, int(number), "", "" if whole else atom)


def _rates(source: Source, one: StarList) -> Series:
    """Return the values of a list, times as rates."""
    _refuse_several_molecules(source, one)
    unit = one.tags.get(one.kind.units, "")
    convert = _converter(source, one, unit) if one.kind.units else None
    series = Series(
        name=_name(one),
        unit="s-1" if convert else "",
        is_profile=False,
    )
    for row in one.rows:
        key = _site(one.kind, row)
        if key is not None:
            point = _point(source, one, row)
            if convert and point.value <= 0:
                cell, wanted = row.cells[one.kind.value], "a time or rate is above 0"
                where = f"{one.frame} {one.kind.value}"
                raise UnreadableCellError(source.path, row.number, where, cell, wanted)
            _add(source, one, series, (key, row), convert(point) if convert else point)
    return series


def _converter(source: Source, one: StarList, unit: str) -> Callable[[Point], Point]:
    """Return what turns a value and its error into a rate in s-1."""
    if unit not in _UNITS:
        stated = f"the unit {unit!r}" if unit else "no unit"
        problem = f"list {one.frame} has {stated} in {one.kind.units}"
        remedy = f"write one of {', '.join(_UNITS)} there"
        raise FileProblemError(source.path, problem, remedy)
    seconds, what = _UNITS[unit]

    def from_time(point: Point) -> Point:
        rate = 1 / (point.value * seconds)
        return Point(rate, rate * point.error / point.value)

    def from_rate(point: Point) -> Point:
        return Point(point.value / seconds, point.error / seconds)

    return from_time if what == "time" else from_rate


def _shifts(source: Source, one: StarList, several: bool) -> Iterator[Series]:  # noqa: FBT001
    """Yield the shifts of each backbone atom of a list."""
    _refuse_several_molecules(source, one)
    parts: dict[str, Series] = {}
    for row in one.rows:
        key, atom = _site(one.kind, row), row.cells.get("Atom_ID", "")
        atom = "H" if atom == "HN" else atom
        if key is None or atom not in _BACKBONE:
            continue
        name = f"shift_{atom}" + (f"_{one.frame}" if several else "")
        series = parts.setdefault(atom, Series(name=name, unit="ppm", is_profile=False))
        _add(source, one, series, (key, row), _point(source, one, row))
    for atom in _BACKBONE:
        if atom in parts:
            yield parts[atom]


def _point(source: Source, one: StarList, row: StarRow) -> Point:
    path, number = source.path, row.number
    value, error = one.kind.value, one.kind.error
    return Point(
        parse_number(
            row.cells.get(value, ""),
            path=path,
            row=number,
            column=f"{one.frame} {value}",
        ),
        parse_error(
            row.cells.get(error, ""),
            path=path,
            row=number,
            column=f"{one.frame} {error}",
        )
        or math.nan,
    )


def _add(
    source: Source,
    one: StarList,
    series: Series,
    where: tuple[SiteKey, StarRow],
    point: Point,
) -> None:
    """Add a point to a series unless its value is missing."""
    key, row = where
    if math.isnan(point.value):
        return
    if (key, 0.0) in series.points:
        first = next(r.number for r in one.rows if _site(one.kind, r) == key)
        where_named = f"site {key} of {one.frame}"
        raise RepeatedRowError(source.path, (first, row.number), where_named)
    series.points[key, 0.0] = point


def _refuse_several_molecules(source: Source, one: StarList) -> None:
    tag = f"Entity_ID{one.kind.site}"
    found = sorted({row.cells.get(tag, "") for row in one.rows} - {""})
    if len(found) > 1:
        problem = (
            f"list {one.frame} holds several molecules (entities {', '.join(found)})"
        )
        remedy = "write its values as a table that names their chains"
        raise FileProblemError(source.path, problem, remedy)


def _name(one: StarList) -> str:
    """Return the name of a quantity, with the proton frequency where it is stated."""
    frequency = _frequency(one)
    return f"{one.kind.name}_{round(frequency)}MHz" if frequency else one.kind.name


def _frequency(one: StarList) -> float:
    """Return the proton frequency of a list in MHz, 0 where it is not stated."""
    try:
        return float(one.tags.get("Spectrometer_frequency_1H", ""))
    except ValueError:
        return 0.0


def _join_points(
    rates: list[tuple[StarList, Series]], notes: list[str]
) -> Iterator[Series]:
    """Yield the series, with lists named by their field joined as one profile."""
    by_name: dict[str, list[tuple[StarList, Series]]] = defaultdict(list)
    for one, series in rates:
        by_name[series.name].append((one, series))
    for name, parts in by_name.items():
        several = len(parts) >= _LEAST_POINTS and parts[0][0].kind.loop in _FIELD_LOOPS
        places = [_field_of(one) for one, _ in parts] if several else []
        frames = ", ".join(one.frame for one, _ in parts)
        if (
            places
            and all(places)
            and len({(p.stem, p.x_unit) for p in places if p}) == 1
        ):
            xs = [place.x or 0.0 for place in places if place]
            if len(set(xs)) == len(xs):
                unit = places[0].x_unit if places[0] else ""
                yield _profile(parts, xs, unit)
                notes.append(
                    f"the lists {frames} were recognised by their names as one profile "
                    f"of {name}, x in {unit}."
                )
                continue
        if several:
            notes.append(
                f"the {len(parts)} lists of {name} are kept apart ({frames}); if they "
                f"are points of one profile, name their save frames by the field, such "
                f"as {parts[0][0].kind.name}_20kHz."
            )
        yield from (series for _, series in parts)


def _field_of(one: StarList) -> ColumnName | None:
    """Return the field that the name of a list ends in; None without a unit."""
    for name in (one.frame, one.tags.get("Name", "")):
        parts = split_name(name)
        if parts.x is not None and parts.x_unit in ("Hz", "kHz"):
            return parts
    return None


def _profile(
    parts: list[tuple[StarList, Series]], xs: list[float], unit: str
) -> Series:
    first, series = parts[0]
    points = {
        (key, x): point
        for (_, part), x in zip(parts, xs, strict=True)
        for (key, _), point in part.points.items()
    }
    frequency = _frequency(first)
    return replace(
        series,
        is_profile=True,
        x_name="x",
        x_unit=unit,
        points=points,
        base=first.kind.name if frequency else "",
        conditions=Conditions(proton_frequency_megahertz=frequency),
    )


def _distinct(series: list[Series]) -> Iterator[Series]:
    """Yield the series, numbered where two lists have one name."""
    total, seen = Counter(one.name for one in series), defaultdict[str, int](int)
    for one in series:
        seen[one.name] += 1
        several = total[one.name] > 1
        yield replace(one, name=f"{one.name}_{seen[one.name]}") if several else one


def _notes(source: Source, lists: list[StarList], series: list[Series]) -> list[str]:
    name = source.path.name
    notes = [f"{name}: lists read: {', '.join(one.frame for one in lists)}."]
    converted = {
        f"{one.kind.name} from {one.tags[one.kind.units]}"
        for one in lists
        if one.kind.units and one.tags[one.kind.units] != "s-1"
    }
    if converted:
        notes.append(
            f"{name}: turned into rates in s-1: {', '.join(sorted(converted))}."
        )
    lost = sum(_site(one.kind, row) is None for one in lists for row in one.rows)
    if lost:
        notes.append(f"{name}: {lost} rows are not assigned to a residue, left out.")
    n_points = sum(len(one.points) for one in series)
    n_rows = sum(len(one.rows) for one in lists)
    if lists[0].kind == _SHIFTS and n_points < n_rows - lost:
        kept = ", ".join(_BACKBONE)
        notes.append(f"{name}: {n_points} of {n_rows} shifts read, those of {kept}.")
    return notes
