"""From tables of values to verdicts, group by group."""

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from structmap.experiment import SPINNING_MODEL
from structmap.one_process.catalogue import Conditions
from structmap.one_process.columns import Prepared
from structmap.one_process.preparing import prepare_profiles
from structmap.one_process.reference import Reference, adjust_by_holm
from structmap.one_process.sharing import OneProcess, TestOptions, judge_group
from structmap.values import ValueTable

ONE_PROCESS_COLUMNS = (
    *("group", "n_sites", "model", "parameter", "unit", "value", "low", "high"),
    *("verdict", "p_distinct", "detectable_ratio", "reference_p", "sites_apart"),
    *("points_left_out", "sites"),
)


def analyse_table(
    table: ValueTable,
    model_name: str,
    *,
    rng: np.random.Generator,
    conditions: Conditions | None = None,
    options: TestOptions | None = None,
    quantity: str = "",
) -> tuple[OneProcess, ...]:
    """Say of each group of a table whether one process explains it.

    Parameters
    ----------
    table : ValueTable
        Its `group` column makes the groups; without one all sites are one group.
    model_name : str
        Name of the model.
    rng : numpy.random.Generator
        Draws replicates and random groups.
    conditions : Conditions, optional
        Spinning rate, sample, protein and the like.
    options : TestOptions, optional
        Choices of the test.
    quantity : str, optional
        Quantity to take; blank takes the first profile.

    Returns
    -------
    tuple of OneProcess
        In the order in which the groups first stand in the table.

    Raises
    ------
    UnusableProfileError
        If the table has no such profile, or its x cannot be used.
    UnknownUnitError
        If x has no unit that fits the model.
    UnknownProcessModelError, MissingConditionError
        If the model is not known or lacks a condition.
    """
    known = conditions or Conditions()
    prepared = prepare_profiles(table, model_name, conditions=known, quantity=quantity)
    groups = _groups_of(table, prepared.row)
    if model_name != SPINNING_MODEL or known.experiment.nucleus != "1H":
        return judge_groups(prepared, groups, rng=rng, options=options)
    # The coupling between protons changes the shape: judge with the other choice too.
    switched = replace(known, homonuclear=not known.homonuclear)
    other = prepare_profiles(table, model_name, conditions=switched, quantity=quantity)
    first, second = (
        judge_groups(choice, groups, rng=child, options=options)
        for choice, child in zip((prepared, other), rng.spawn(2), strict=True)
    )
    return tuple(
        compare_choices(one, two, with_pairs=known.homonuclear)
        for one, two in zip(first, second, strict=True)
    )


def compare_choices(
    one: OneProcess, two: OneProcess, *, with_pairs: bool
) -> OneProcess:
    """Note where the coupling between protons decides the verdict.

    Parameters
    ----------
    one, two : OneProcess
        The same group under both choices; the first is reported.
    with_pairs : bool
        The first one includes the coupling.

    Returns
    -------
    OneProcess
        The first, with a sentence where the verdicts differ.
    """
    choices = ("with", "without") if with_pairs else ("without", "with")
    if one.verdict == two.verdict:
        return one
    note = (
        f"The verdict rests on the coupling between protons: {one.verdict} "
        f"{choices[0]} it, {two.verdict} {choices[1]}."
    )
    return replace(one, notes=(*one.notes, note))


def judge_groups(
    prepared: Prepared,
    groups: Mapping[str, NDArray[np.int64]],
    *,
    rng: np.random.Generator,
    options: TestOptions | None = None,
    references: Mapping[str, Reference] | None = None,
) -> tuple[OneProcess, ...]:
    """Judge several groups of sites against each other's sites.

    Parameters
    ----------
    prepared : Prepared
        Profiles of all sites.
    groups : mapping of str to ndarray of int
        Indices of sites by name of the group.
    rng : numpy.random.Generator
        A child of it serves each group, so that groups do not change each other.
    options : TestOptions, optional
        Choices of the test.
    references : mapping of str to Reference, optional
        By name of the group, what it is compared with; else the sites outside it.

    Returns
    -------
    tuple of OneProcess
        In the order of the groups, with Holm's adjusted chances.
    """
    names = tuple(groups)
    results = []
    for name, child in zip(names, rng.spawn(len(names)), strict=True):
        inside = np.zeros(len(prepared.profiles.name), dtype=bool)
        inside[groups[name]] = True
        outside = (references or {}).get(name)
        if outside is None and not inside.all():
            outside = Reference(profiles=prepared.profiles.take(~inside))
        result = judge_group(
            prepared.profiles.take(groups[name]),
            prepared.model,
            rng=child,
            options=options,
            reference=outside,
            caution=prepared.caution,
        )
        results.append(
            replace(
                result,
                group=name,
                points_left_out=prepared.left_out,
                notes=prepared.notes,
            )
        )
    adjusted = adjust_by_holm([result.p_distinct for result in results])
    return tuple(
        replace(result, p_adjusted=chance)
        for result, chance in zip(results, adjusted, strict=True)
    )


def groups_by_row(
    prepared: Prepared, rows: Mapping[str, NDArray[np.int64]]
) -> dict[str, NDArray[np.int64]]:
    """Return groups of profiles from groups of rows of the table.

    Parameters
    ----------
    prepared : Prepared
        Profiles of a table.
    rows : mapping of str to ndarray of int
        Rows of the table by name of the group, for example those of a motional unit.

    Returns
    -------
    dict of str to ndarray of int
        Indices of profiles, each row once; groups without any profile are left out.
    """
    found = {
        name: np.nonzero(np.isin(prepared.row, members))[0]
        for name, members in rows.items()
    }
    return {name: members for name, members in found.items() if len(members)}


def table_rows(results: tuple[OneProcess, ...]) -> list[dict[str, str]]:
    """Return the rows of ``one_process.csv``.

    Parameters
    ----------
    results : tuple of OneProcess
        A verdict a group.

    Returns
    -------
    list of dict of str to str
        Keys are `ONE_PROCESS_COLUMNS`; blank where unknown or open.
    """
    rows = []
    for result in results:
        cells = (
            *(result.group, str(len(result.sites)), result.model, result.parameter),
            *(result.unit, _number(result.value), _number(result.low)),
            *(_number(result.high), result.verdict, _number(result.p_distinct)),
            *(_number(result.detectable_ratio), _number(result.reference_p)),
            *(" ".join(result.apart), "; ".join(result.points_left_out)),
            " ".join(result.sites),
        )
        rows.append(dict(zip(ONE_PROCESS_COLUMNS, cells, strict=True)))
    return rows


def _groups_of(
    table: ValueTable, rows: NDArray[np.int64]
) -> dict[str, NDArray[np.int64]]:
    names = [str(table.group[row]) for row in rows]
    if not any(names):
        return {"all": np.arange(len(rows))}
    order = dict.fromkeys(name for name in names if name)
    return {
        wanted: np.array([i for i, name in enumerate(names) if name == wanted])
        for wanted in order
    }


def _number(value: float) -> str:
    return f"{value:.6g}" if np.isfinite(value) else ""
