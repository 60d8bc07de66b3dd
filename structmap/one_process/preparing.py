"""Profiles of the sites of a table, in the form that a model takes."""

import re
from dataclasses import replace

import numpy as np

from structmap.errors import UnusableProfileError
from structmap.experiment import SPINNING_MODEL, Experiment
from structmap.one_process.catalogue import Conditions, make_model
from structmap.one_process.columns import (
    Columns,
    Prepared,
    checked_x,
    finish,
    name_place,
    refuse_few_points,
)
from structmap.one_process.families import (
    at_conditions,
    judge_points,
    prepare_family,
    share_note,
)
from structmap.one_process.model_free import MOBILE_NOE
from structmap.values import Quantity, ValueTable

_RATE_NAME = re.compile(r"^(R1|R2|NOE)(?:[_ ]?(\d+(?:\.\d+)?))?(?:[_ ]?MHz)?$")
_LEAST_POINTS = 2


def prepare_profiles(
    table: ValueTable, model_name: str, *, conditions: Conditions, quantity: str = ""
) -> Prepared:
    """Return the profiles of a table in the form that a model takes.

    Parameters
    ----------
    table : ValueTable
        With one profile, or for ``model-free`` with R1 and R2.
    model_name : str
        Name of the model.
    conditions : Conditions
        Spinning rate, sample, protein and the like.
    quantity : str, optional
        Quantity to take; blank takes the first profile.

    Returns
    -------
    Prepared
        Sites without any value are left out; errors that are missing are filled in.

    Raises
    ------
    UnusableProfileError
        If the table has no such profile, or its x cannot be used.
    UnknownUnitError
        If x has no unit that fits the model.
    UnknownProcessModelError, MissingConditionError
        If the model is not known or lacks a condition.
    """
    if model_name == "model-free":
        return _prepare_tumbling(table, conditions)
    family = _find_profiles(table, quantity)
    if model_name == SPINNING_MODEL and len(family) > 1:
        return prepare_family(table, family, conditions=conditions)
    profile = family[0]
    if len(family) > 1:
        raise UnusableProfileError(
            table.names[0],
            f"{profile.base} stands at {len(family)} conditions and {model_name} takes "
            "one",
            f"name one with --process-quantity, such as {profile.name}",
        )
    conditions = at_conditions(profile, conditions)
    model = make_model(model_name, conditions)
    x = checked_x(table, profile, model)
    refuse_few_points(name_place(table, profile), len(x), model)
    reasons, doubtful = ("",) * len(x), np.zeros(len(x), dtype=bool)
    if model_name == SPINNING_MODEL:
        reasons, doubtful = judge_points(x, conditions)
    keep = np.array([not reason for reason in reasons])
    if np.count_nonzero(keep) < _LEAST_POINTS:
        raise UnusableProfileError(
            table.names[0],
            f"only {np.count_nonzero(keep)} of {len(x)} points of {profile.name} are "
            f"left ({next(filter(None, reasons))})",
            "measure at other fields, or set the sample and the lowest field",
        )
    kept = Columns(
        x=x[keep], value=profile.value[:, keep], error=profile.error[:, keep]
    )
    shown = [f"{value:g} {profile.x_unit}".strip() for value in profile.x]
    prepared = finish(
        table,
        model,
        kept,
        caution=doubtful[keep],
        left_out=tuple(
            f"{place}: {reason}"
            for place, reason in zip(shown, reasons, strict=True)
            if reason
        ),
    )
    others = [one.name for one in table.quantities if len(one.x) and one is not profile]
    prepared = replace(prepared, quantities=(profile.name,))
    if others and not quantity:
        note = (
            f"{profile.name} is fitted; the other profiles ({', '.join(others)}) are "
            "not: choose one with --process-quantity."
        )
        prepared = replace(prepared, notes=(*prepared.notes, note))
    if model_name != SPINNING_MODEL:
        return prepared
    return replace(prepared, notes=(*prepared.notes, *share_note(conditions)))


def _find_profiles(table: ValueTable, quantity: str) -> list[Quantity]:
    """Return a profile, with those of the same quantity at other conditions."""
    profiles = [one for one in table.quantities if len(one.x)]
    if quantity:
        profiles = [one for one in profiles if quantity in (one.name, one.base)]
    if not profiles:
        what = f"quantity {quantity} is no profile"
        raise UnusableProfileError(
            table.names[0],
            what if quantity else "there is no profile",
            "give one row a point with columns x, value and error, or a column for "
            "each x",
        )
    first = profiles[0]
    if not first.base or first.name == quantity:
        return [first]
    return [one for one in profiles if one.base == first.base]


def _prepare_tumbling(table: ValueTable, conditions: Conditions) -> Prepared:
    """Return R1 and R2 of all fields as the points of one profile."""
    found = [(one, _RATE_NAME.match(one.name)) for one in table.quantities]
    common = conditions.experiment.proton_frequency_megahertz
    rates, observables, fields, mobile = [], [], [], np.zeros(len(table.line), bool)
    for one, parts in found:
        if parts is None or len(one.x):
            continue
        if parts[1] == "NOE":
            mobile |= one.value[:, 0] < MOBILE_NOE
            continue
        rates.append(one)
        observables.append(parts[1])
        fields.append(float(parts[2] or common))
    if "R1" not in observables or "R2" not in observables:
        raise UnusableProfileError(
            table.names[0],
            "model-free needs the quantities R1 and R2",
            "name the columns R1 and R2, with the field for several (R1_600)",
        )
    model = make_model(
        "model-free",
        replace(
            conditions, observables=tuple(observables), fields_megahertz=tuple(fields)
        ),
    )
    value = np.column_stack([one.value[:, 0] for one in rates])
    value[mobile] = np.nan
    columns = Columns(
        x=np.arange(float(len(rates))),
        value=value,
        error=np.column_stack([one.error[:, 0] for one in rates]),
    )
    caution = np.zeros(len(rates), dtype=bool)
    prepared = finish(table, model, columns, caution=caution, left_out=())
    names = tuple(one.name for one, parts in found if parts is not None)
    prepared = replace(prepared, quantities=names)
    if not mobile.any():
        return prepared
    note = f"{mobile.sum()} sites with a NOE below {MOBILE_NOE} are left out: mobile."
    return replace(prepared, notes=(*prepared.notes, note))


def spinning_conditions(
    *,
    mas_rate_hertz: float,
    proton_frequency_megahertz: float,
    sample: str,
    keep_points: bool = False,
) -> Conditions:
    """Return the conditions that the settings of an analysis name.

    Parameters
    ----------
    mas_rate_hertz : float
        Rate of magic-angle spinning in Hz; 0 is not given.
    proton_frequency_megahertz : float
        Larmor frequency of the protons in MHz; 0 is not given.
    sample : str
        ``protonated`` or ``deuterated``.
    keep_points : bool, optional
        Keep points that are not motion alone.

    Returns
    -------
    Conditions
        For `analyse_table` and `prepare_profiles`.
    """
    return Conditions(
        experiment=Experiment(
            mas_rate_hertz=mas_rate_hertz,
            proton_frequency_megahertz=proton_frequency_megahertz,
            sample="deuterated" if sample == "deuterated" else "protonated",
        ),
        keep_points=keep_points,
    )
