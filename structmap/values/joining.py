"""Several tables as one, joined by site."""

import math
import re
from collections import defaultdict
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

from structmap.values.errors import NoQuantityError, UnclearColumnsError
from structmap.values.reading import Reading, Series, SiteFacts, SiteKey
from structmap.values.records import Quantity, ValueTable


def join_readings(readings: Sequence[Reading]) -> ValueTable:
    """Join tables by site.

    A quantity that several tables name is one quantity when no site has a value (at
    the same x) in two of them; else each keeps its own, with what tells the file names
    apart added to its name. A table that names no chain, or no atom, takes those of
    the others where they name just one.

    Parameters
    ----------
    readings : sequence of Reading
        At least one.

    Returns
    -------
    ValueTable
        A row a site that has a value.

    Raises
    ------
    UnclearColumnsError
        If some tables name several chains and others none.
    NoQuantityError
        If no value is left.
    """
    notes = [note for reading in readings for note in reading.notes]
    readings = _fill_chain(readings, notes)
    readings = _fill_atom(readings, notes)
    sites = _join_sites(readings, notes)
    series = _join_series(readings, notes)
    measured = {key for one in series for key, _ in one.points}
    if not measured:
        raise NoQuantityError(readings[0].path, tuple(one.name for one in series))
    blank = [key for key in sites if key not in measured]
    if blank:
        shown = ", ".join(str(key) for key in blank[:5]) + ", ..." * (len(blank) > 5)
        notes.append(
            f"{len(blank)} rows hold no value and count as unmeasured: {shown}."
        )
    rows = {key: n for n, key in enumerate(key for key in sites if key in measured)}
    return ValueTable(
        names=tuple(reading.path.name for reading in readings),
        sha256=tuple(reading.sha256 for reading in readings),
        auth_asym_id=_texts([key.chain for key in rows]),
        auth_seq_id=np.array([key.number for key in rows]),
        ins_code=_texts([key.ins_code for key in rows]),
        comp_id=_texts([sites[key].comp for key in rows]),
        atom=_texts([key.atom for key in rows]),
        group=_texts([sites[key].group for key in rows]),
        line=np.array([sites[key].line for key in rows]),
        quantities=tuple(_quantity(one, rows) for one in series if one.points),
        notes=tuple(notes),
    )


def _texts(texts: list[str]) -> np.ndarray[tuple[int], np.dtype[np.str_]]:
    return np.array(texts, dtype=np.str_)


def _fill_chain(readings: Sequence[Reading], notes: list[str]) -> Sequence[Reading]:
    """Give tables without chains the only chain that the others name."""
    named = {key.chain for reading in readings for key in reading.sites} - {""}
    bare = [r for r in readings if all(not key.chain for key in r.sites)]
    if not named or not bare:
        return readings
    if len(named) > 1:
        problem = (
            f"is missing, while other files name chains {', '.join(sorted(named))}"
        )
        raise UnclearColumnsError(
            bare[0].path, ("auth_asym_id",), problem, "name the chain of each row"
        )
    chain = named.pop()
    notes.append(
        f"{', '.join(r.path.name for r in bare)}: no chain named, {chain} taken."
    )
    return [
        _rename(r, lambda key: key._replace(chain=chain)) if r in bare else r
        for r in readings
    ]


def _fill_atom(readings: Sequence[Reading], notes: list[str]) -> Sequence[Reading]:
    """Bring atoms together where each residue has one atom or none in each table.

    ``HN`` is what many programs call the amide hydrogen ``H``.
    """
    if len(readings) == 1:
        return readings
    atoms: dict[SiteKey, set[str]] = defaultdict(set)
    for key in (key for reading in readings for key in reading.sites):
        atoms[key._replace(atom="")].add(_plain_atom(key.atom))
    first: dict[SiteKey, str] = {}
    for key in (key for reading in readings for key in reading.sites):
        if key.atom:
            first.setdefault(key._replace(atom=_plain_atom(key.atom)), key.atom)

    def together(key: SiteKey) -> SiteKey:
        bare = key._replace(atom="")
        others = atoms[bare] - {""}
        atom = _plain_atom(key.atom) or (min(others) if len(others) == 1 else "")
        return key._replace(atom=first.get(key._replace(atom=atom), atom))

    changed = {key for r in readings for key in r.sites if together(key) != key}
    if changed:
        notes.append(
            f"{len(changed)} sites were joined with those of the other files under one "
            "atom name (HN is H; a row without an atom takes the only one)."
        )
    return [_rename(reading, together) for reading in readings]


def _plain_atom(atom: str) -> str:
    return "H" if atom == "HN" else atom


def _rename(reading: Reading, rename: Callable[[SiteKey], SiteKey]) -> Reading:
    sites: dict[SiteKey, SiteFacts] = {}
    for key, facts in reading.sites.items():
        sites.setdefault(rename(key), facts)
    series = tuple(
        replace(one, points={(rename(key), x): p for (key, x), p in one.points.items()})
        for one in reading.series
    )
    return replace(reading, sites=sites, series=series)


def _join_sites(
    readings: Sequence[Reading], notes: list[str]
) -> dict[SiteKey, SiteFacts]:
    """Join what the tables say of each site; the first name given stands."""
    sites: dict[SiteKey, SiteFacts] = {}
    for reading in readings:
        for key, facts in reading.sites.items():
            known = sites.get(key, facts)
            if known.comp and facts.comp and known.comp != facts.comp:
                notes.append(
                    f"{reading.path.name}: {key} is {facts.comp} there and "
                    f"{known.comp} in a file before it; the first name stands."
                )
            sites[key] = known._replace(
                comp=known.comp or facts.comp, group=known.group or facts.group
            )
    return sites


def _join_series(readings: Sequence[Reading], notes: list[str]) -> list[Series]:
    by_name: dict[str, list[tuple[int, Series]]] = defaultdict(list)
    for n, reading in enumerate(readings):
        for one in reading.series:
            by_name[one.name].append((n, one))
    marks = file_marks([reading.path for reading in readings])
    joined: list[Series] = []
    for name, parts in by_name.items():
        files = ", ".join(readings[n].path.name for n, _ in parts)
        if len(parts) == 1:
            joined.append(parts[0][1])
        elif _continue_each_other([one for _, one in parts]):
            points = {at: point for _, one in parts for at, point in one.points.items()}
            joined.append(replace(parts[0][1], points=points))
            notes.append(f"{name}: the values of {files} were joined as one quantity.")
        else:
            joined += [replace(one, name=f"{name}_{marks[n]}") for n, one in parts]
            apart = ", ".join(f"{name}_{marks[n]}" for n, _ in parts)
            notes.append(f"{name} stands in {files}; kept apart as {apart}.")
    return joined


def _continue_each_other(parts: list[Series]) -> bool:
    alike = {(one.unit, one.is_profile, one.x_unit) for one in parts}
    places = [at for one in parts for at in one.points]
    return len(alike) == 1 and len(set(places)) == len(places)


def file_marks(paths: Sequence[Path]) -> list[str]:
    """Return for each file the part of its name that the others do not share.

    Parameters
    ----------
    paths : sequence of Path
        The files.

    Returns
    -------
    list of str
        ``500Mhz`` and ``600Mhz`` for ``500Mhz-R1.dat`` and ``600Mhz-R1.dat``; numbers
        from 1 where the names do not differ.
    """
    words = [[w for w in re.split(r"[^A-Za-z0-9.]+", path.stem) if w] for path in paths]
    shared = set.intersection(*(set(parts) for parts in words))
    marks = ["_".join(w for w in parts if w not in shared) for parts in words]
    if len(set(marks)) < len(marks) or not all(marks):
        return [str(n) for n in range(1, len(paths) + 1)]
    return marks


def _quantity(one: Series, rows: dict[SiteKey, int]) -> Quantity:
    """Return a series as arrays over the rows of the joined table."""
    xs = sorted({x for _, x in one.points}) if one.is_profile else []
    column = {x: n for n, x in enumerate(xs)}
    shape = (len(rows), max(1, len(xs)))
    value, error = np.full(shape, math.nan), np.full(shape, math.nan)
    for (key, x), point in one.points.items():
        at = rows[key], column.get(x, 0)
        value[at], error[at] = point.value, point.error
    return Quantity(
        name=one.name,
        unit=one.unit,
        x=np.array(xs, dtype=np.float64),
        x_name=one.x_name,
        x_unit=one.x_unit,
        value=value,
        error=error,
        has_errors=bool(np.isfinite(error).any()),
        base=one.base,
        mas_rate_hertz=one.conditions.mas_rate_hertz,
        proton_frequency_megahertz=one.conditions.proton_frequency_megahertz,
    )
