"""The smaller jobs: only the numbering, only one process, forms, shifts."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import numpy as np

from structmap.analysis.processes import (
    conditions_of,
    prepare_by_settings,
    process_quantity,
)
from structmap.analysis.steps import (
    match_by_settings,
)
from structmap.errors import SettingError
from structmap.experiment import convert_to_base
from structmap.files import write_folder
from structmap.forms import compare_folders
from structmap.one_process import (
    ONE_PROCESS_COLUMNS,
    TestOptions,
    analyse_table,
    describe_whole,
    plain_words,
    table_rows,
    whole_rows,
    whole_words,
)
from structmap.page import forms_html
from structmap.settings import Settings
from structmap.shifts import (
    compare_shifts,
    find_doubled_peaks,
    perturbation_rows,
    perturbation_table,
    pick_list,
    profile_rows,
)
from structmap.sites import Sites, match_rows
from structmap.structure import read_structure
from structmap.tables import Table, table_text
from structmap.values import read_values


def match_numbering(
    coordinates: Path | str,
    values: Path | str | Sequence[Path | str],
    settings: Settings,
) -> tuple[Table, tuple[str, ...]]:
    """Bring the numbering of values and coordinates together and no more.

    Parameters
    ----------
    coordinates : Path or str
        Coordinate file.
    values : Path or str, or sequence of them
        Tables of values.
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    table : Table
        A row for each row of the values.
    notes : tuple of str
        Offsets, copies, names that differ, rows without a residue.

    Raises
    ------
    StructmapError
        If a file cannot be used or the numbering is ambiguous.
    """
    paths = [values] if isinstance(values, str | Path) else list(values)
    table = read_values([Path(path) for path in paths], columns=settings.columns)
    structure = read_structure(Path(coordinates), model=settings.coordinate_model)
    sites = match_by_settings(structure, table, settings)
    rows = match_rows(structure, table, sites)
    columns = tuple(rows[0]) if rows else ()
    listing = Table(columns=columns, rows=tuple(tuple(row.values()) for row in rows))
    return listing, match_notes(sites)


def match_notes(sites: Sites) -> tuple[str, ...]:
    """Return the reconciliation of the numbering in lines.

    Parameters
    ----------
    sites : Sites
        The measured sites.

    Returns
    -------
    tuple of str
        One line a chain, one a mismatch, one an unmatched row.
    """
    lines = []
    for chain in sites.chains:
        text = f"chain {chain.auth_asym_id}: offset {chain.offset:+d} ({chain.how}), "
        text += f"{chain.n_matched} rows matched"
        if chain.n_named:
            text += f", {chain.n_agreeing} of {chain.n_named} names agree"
        lines.append(text)
    lines += [f"name differs: {phrase}" for phrase in sites.mismatches]
    lines += [f"no residue: {phrase}" for phrase in sites.unmatched]
    return (*lines, *sites.notes)


def judge_table(
    values: Sequence[Path | str], settings: Settings
) -> tuple[Table, tuple[str, ...]]:
    """Test whether one process explains the groups of a table of profiles.

    Parameters
    ----------
    values : sequence of Path or str
        Tables; a column ``group`` parts the sites, else all are one group.
    settings : Settings
        Name the model and its conditions.

    Returns
    -------
    table : Table
        As ``one_process.csv``.
    notes : tuple of str
        The verdicts in sentences.

    Raises
    ------
    StructmapError
        If a file cannot be used, or the model is unknown or lacks a condition.
    """
    if not settings.model:
        raise SettingError("options", "model", "is not given", "name one with --model")
    read = read_values([Path(path) for path in values], columns=settings.columns)
    rng = np.random.default_rng(settings.seed)
    found = analyse_table(
        read,
        settings.model,
        rng=rng,
        conditions=conditions_of(settings),
        options=TestOptions(errors_trusted=settings.errors_trusted),
        quantity=process_quantity(settings),
    )
    rows = table_rows(found)
    notes = [f"{one.group}: {' '.join(plain_words(one))}" for one in found]
    notes += [note for note in read.notes if "taken as not given" in note]
    if not any(read.group):
        whole = describe_whole(prepare_by_settings(read, settings), rng=rng)
        if whole:
            notes += whole_words(whole)
            rows += whole_rows(whole, ONE_PROCESS_COLUMNS)
    cells = tuple(tuple(row.values()) for row in rows)
    return Table(columns=ONE_PROCESS_COLUMNS, rows=cells), tuple(notes)


@dataclass(frozen=True, slots=True, kw_only=True)
class ShiftChoices:
    """How shift lists are compared.

    Attributes
    ----------
    weights : dict of str to float
        Weights of the nuclei that enter; empty takes the usual ones of H and N.
    x : tuple of float
        Total ligand or the like of each list; empty compares with the last list.
    x_unit : str
        Unit of x, for example uM.
    list_names : tuple of str
        Which shift list of each file; empty where each holds one.
    """

    weights: dict[str, float] = field(default_factory=dict)
    x: tuple[float, ...] = ()
    x_unit: str = ""
    list_names: tuple[str, ...] = ()


def perturb_shifts(
    lists: Sequence[Path | str], choices: ShiftChoices | None = None
) -> tuple[Table, tuple[str, ...]]:
    """Turn two or more shift lists into a perturbation of each residue.

    Parameters
    ----------
    lists : sequence of Path or str
        The list to start from, then the others in order.
    choices : ShiftChoices, optional
        Weights, x of a titration, which list of a file.

    Returns
    -------
    table : Table
        One that `analyse` reads: a row a residue, or with x a row a point.
    notes : tuple of str
        Threshold, lost and doubled peaks.

    Raises
    ------
    StructmapError
        If a file cannot be used, no residue stands in two lists, or a choice does not
        fit the lists.
    """
    chosen = choices or ShiftChoices()
    _check_shift_choices(chosen, len(lists))
    names = chosen.list_names or ("",) * len(lists)
    tables = [
        pick_list(read_values([Path(path)]), name)
        for path, name in zip(lists, names, strict=True)
    ]
    comparison = compare_shifts(tables, weights=chosen.weights or None)
    if chosen.x:
        series = perturbation_table(
            comparison, x=chosen.x, x_name="x", x_unit=chosen.x_unit
        )
        rows = profile_rows(series)
    else:
        doubled = find_doubled_peaks(tables[-1]) if comparison.doubled.any() else None
        rows = perturbation_rows(comparison, doubled=doubled)
    columns = tuple(rows[0])
    cells = tuple(tuple(row.values()) for row in rows)
    told = [note for table in tables for note in table.notes if "shift list" in note]
    notes = (*told, _weights_note(chosen, comparison.nuclei), *comparison.notes)
    return Table(columns=columns, rows=cells), notes


def _check_shift_choices(choices: ShiftChoices, n_lists: int) -> None:
    if choices.list_names and len(choices.list_names) != n_lists:
        raise SettingError(
            "options",
            "list",
            f"names {len(choices.list_names)} lists for {n_lists} files",
            "give one a file, parted by commas",
        )
    refused = [name for name, size in choices.weights.items() if not 0 < size < np.inf]
    if refused:
        remedy = "give numbers above 0, as in H=1,N=0.14"
        raise SettingError("options", "weights", f"of {refused[0]} is not", remedy)
    x = choices.x
    if not x:
        return
    rising = all(low < high for low, high in pairwise(x))
    if len(x) != n_lists or not rising or not 0 <= x[0] <= x[-1] < np.inf:
        raise SettingError(
            "options",
            "x",
            f"is {', '.join(f'{value:g}' for value in x)}",
            f"give {n_lists} rising values of 0 or more, one a list in the same order",
        )
    convert_to_base(x, choices.x_unit, quantity="--x-unit")


def _weights_note(choices: ShiftChoices, nuclei: tuple[str, ...]) -> str:
    if choices.weights:
        shown = ", ".join(f"{name} {choices.weights[name]:g}" for name in nuclei)
    else:
        usual = {"H": "H 1", "N": "N 0.14 (0.20 in glycine)"}
        shown = ", ".join(usual[name] for name in nuclei)
    return f"Weights of the nuclei: {shown}."


def compare_analyses(folders: Sequence[Path], output: Path) -> tuple[str, ...]:
    """Hold the units of one analysis against other forms of the same protein.

    Parameters
    ----------
    folders : sequence of Path
        Folders of analyses; the form that was measured first.
    output : Path
        Folder for ``forms.csv``, ``contacts_between_forms.csv`` and ``page.html``.

    Returns
    -------
    tuple of str
        One line a unit.

    Raises
    ------
    StructmapError
        If a folder is not one of an analysis or holds another protein.
    """
    found = compare_folders(folders)
    write_folder(
        output,
        {
            "forms.csv": table_text(found.forms_table),
            "contacts_between_forms.csv": table_text(found.contacts_table),
            "page.html": forms_html(found),
        },
    )
    return tuple(
        f"{unit.name}: {verdict}"
        for unit, verdict in zip(found.units, found.verdicts, strict=True)
    )
