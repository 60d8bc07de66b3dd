"""Profiles of the sites of a table, in the form that a model takes."""

import re
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.errors import UnusableProfileError
from structmap.experiment import (
    SPINNING_MODEL,
    Experiment,
    convert_to_base,
    find_coherent_points,
    find_doubtful_points,
)
from structmap.one_process.catalogue import Conditions, make_model
from structmap.one_process.dispersion import interaction_strengths
from structmap.one_process.engine import describe_fit, make_solver
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.model_free import MOBILE_NOE
from structmap.one_process.profiles import Profiles
from structmap.values import Quantity, ValueTable

_RATE_NAME = re.compile(r"^(R1|R2|NOE)(?:[_ ]?(\d+(?:\.\d+)?))?(?:[_ ]?MHz)?$")
_LEAST_POINTS = 2


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Prepared:
    """Profiles of all sites of a table, ready for a model.

    Attributes
    ----------
    profiles : Profiles
        At the points kept, in the base unit.
    model : Model
    caution : ndarray of bool, shape (n_points,)
        Points kept with caution.
    left_out : tuple of str
        Points left out with the reason, one phrase each.
    row : ndarray of int, shape (n_sites,)
        Row of the table behind each profile.
    notes : tuple of str
        What was mended or left out and which interactions count, one sentence each.
    quantities : tuple of str
        Quantities of the table that make up the profiles.
    """

    profiles: Profiles
    model: Model
    caution: NDArray[np.bool_]
    left_out: tuple[str, ...]
    row: NDArray[np.int64]
    notes: tuple[str, ...]
    quantities: tuple[str, ...] = ()


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
    model = make_model(model_name, conditions)
    profile = _find_profile(table, quantity)
    x = _checked_x(table, profile, model)
    experiment = conditions.experiment
    reasons, doubts = ("",) * len(x), ("",) * len(x)
    if model_name == SPINNING_MODEL:
        reasons = find_coherent_points(x, experiment)
        doubts = find_doubtful_points(x, experiment)
    if conditions.keep_points:
        doubts = tuple(map(str.__add__, doubts, reasons))
        reasons = ("",) * len(x)
    keep = np.array([not reason for reason in reasons])
    if np.count_nonzero(keep) < _LEAST_POINTS:
        raise UnusableProfileError(
            table.names[0],
            f"only {np.count_nonzero(keep)} of {len(x)} points of {profile.name} are "
            f"left ({next(filter(None, reasons))})",
            "measure at other fields, or set the sample and the lowest field",
        )
    kept = _Columns(
        x=x[keep], value=profile.value[:, keep], error=profile.error[:, keep]
    )
    shown = [f"{value:g} {profile.x_unit}".strip() for value in profile.x]
    prepared = _finish(
        table,
        model,
        kept,
        caution=np.array([bool(doubt) for doubt in doubts])[keep],
        left_out=tuple(
            f"{place}: {reason}"
            for place, reason in zip(shown, reasons, strict=True)
            if reason
        ),
    )
    prepared = replace(prepared, quantities=(profile.name,))
    if model_name != SPINNING_MODEL:
        return prepared
    return replace(prepared, notes=(*prepared.notes, *_share_note(conditions)))


def _share_note(conditions: Conditions) -> tuple[str, ...]:
    """Say which share of the rate of 15N comes from the shift anisotropy."""
    experiment = conditions.experiment
    if experiment.nucleus != "15N" or not experiment.proton_frequency_megahertz > 0:
        return ()
    dipole, shift = interaction_strengths(experiment)
    share = 100 * shift / (dipole + shift)
    return (
        f"Shift anisotropy gives {share:.0f} % of the rate; it changes the amplitude "
        "and never tau.",
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Columns:
    x: FloatArray
    value: FloatArray
    error: FloatArray


def _finish(
    table: ValueTable,
    model: Model,
    columns: _Columns,
    *,
    caution: NDArray[np.bool_],
    left_out: tuple[str, ...],
) -> Prepared:
    """Leave out empty rows, fill errors in."""
    rows = np.nonzero(np.isfinite(columns.value).any(axis=1))[0]
    if not len(rows):
        raise UnusableProfileError(
            table.names[0], "no site has a value", "check the column of the values"
        )
    names = site_names(table)
    value, error = columns.value[rows], columns.error[rows]
    filled, note = _fill_errors(value, error, columns.x, model)
    profiles = Profiles(
        name=tuple(names[row] for row in rows), x=columns.x, value=value, error=filled
    )
    return Prepared(
        profiles=profiles,
        model=model,
        caution=caution,
        left_out=left_out,
        row=rows,
        notes=(note,) if note else (),
    )


def _fill_errors(
    value: FloatArray, error: FloatArray, x: FloatArray, model: Model
) -> tuple[FloatArray, str]:
    """Return errors without gaps, and a sentence on what was done."""
    missing = np.isfinite(value) & ~(error > 0)
    if not missing.any():
        return error, ""
    given = error[np.isfinite(value) & (error > 0)]
    if len(given):
        common = float(np.median(given))
        note = f"{missing.sum()} values have no error; they take the median {common:g}."
        return np.where(missing, common, error), note
    names = tuple(str(row) for row in range(len(value)))
    plain = Profiles(name=names, x=x, value=value, error=np.ones_like(value))
    fit = describe_fit(make_solver(model, plain))
    common = float(np.sqrt(fit.error_scale)) if fit.freedom_free > 0 else np.nan
    if not common > 0:
        raise UnusableProfileError(
            "the values",
            "no errors are given and too few points to estimate them from",
            "add a column of errors",
        )
    note = f"No errors are given; the scatter about the fits gives {common:.3g}."
    return np.full_like(value, common), note


def _find_profile(table: ValueTable, quantity: str) -> Quantity:
    profiles = [one for one in table.quantities if len(one.x)]
    if quantity:
        profiles = [one for one in profiles if one.name == quantity]
    if profiles:
        return profiles[0]
    what = f"quantity {quantity} is no profile" if quantity else "there is no profile"
    raise UnusableProfileError(
        table.names[0],
        what,
        "give one row a point with columns x, value and error, or a column for each x",
    )


def _checked_x(table: ValueTable, profile: Quantity, model: Model) -> FloatArray:
    """Return x in the base unit of the model, or refuse it."""
    where = f"{table.names[0]}, {profile.x_name or 'x'} of {profile.name}"
    x = np.asarray(profile.x, dtype=np.float64)
    if model.x_unit:
        x = convert_to_base(x, profile.x_unit, quantity=where, base=model.x_unit)
    low = x[x < model.x_lowest]
    if low.size:
        raise UnusableProfileError(
            where,
            f"{low[0]:g} {model.x_unit} is below {model.x_lowest:g}",
            "correct or remove that point",
        )
    values, counts = np.unique(x, return_counts=True)
    if (counts > 1).any():
        raise UnusableProfileError(
            where,
            f"{values[counts > 1][0]:g} {model.x_unit} stands twice".strip(),
            "average the two points or remove one",
        )
    if len(x) <= model.n_own + model.n_shared and model.baseline != "none":
        raise UnusableProfileError(
            where,
            f"{len(x)} points for {model.n_own + model.n_shared} parameters a site",
            f"{model.name} needs at least {model.min_points} points",
        )
    return x


def _prepare_tumbling(table: ValueTable, conditions: Conditions) -> Prepared:
    """Return R1 and R2 of all fields as the points of one profile."""
    found = [(one, _RATE_NAME.match(one.name)) for one in table.quantities]
    common = conditions.experiment.proton_frequency_megahertz
    rates, observables, fields, mobile = [], [], [], np.zeros(len(table.line), bool)
    for one, parts in found:
        if parts is None:
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
    columns = _Columns(
        x=np.arange(float(len(rates))),
        value=value,
        error=np.column_stack([one.error[:, 0] for one in rates]),
    )
    caution = np.zeros(len(rates), dtype=bool)
    prepared = _finish(table, model, columns, caution=caution, left_out=())
    names = tuple(one.name for one, parts in found if parts is not None)
    prepared = replace(prepared, quantities=names)
    if not mobile.any():
        return prepared
    note = f"{mobile.sum()} sites with a NOE below {MOBILE_NOE} are left out: mobile."
    return replace(prepared, notes=(*prepared.notes, note))


def site_names(table: ValueTable) -> tuple[str, ...]:
    """Return a name for each row of a table.

    Parameters
    ----------
    table : ValueTable
        Read values.

    Returns
    -------
    tuple of str
        Chain, number with insertion code, and atom where the table has them
        (``A/56A``, ``30/CD1``), numbered as in the table.
    """
    names = []
    for row in range(len(table.line)):
        number = f"{table.auth_seq_id[row]}{table.ins_code[row]}"
        parts = (str(table.auth_asym_id[row]), number, str(table.atom[row]))
        names.append("/".join(part for part in parts if part))
    return tuple(names)


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
