"""Points of all rows of a table as profiles: checked, without gaps in the errors."""

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from structmap.errors import UnusableProfileError
from structmap.experiment import convert_to_base
from structmap.one_process.engine import describe_fit, make_solver
from structmap.one_process.model import FloatArray, Model
from structmap.one_process.profiles import Profiles
from structmap.values import Quantity, ValueTable


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


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Columns:
    """Points of all rows of a table.

    Attributes
    ----------
    x : ndarray of float, shape (n_points,)
        In the base unit.
    value, error : ndarray of float, shape (n_rows, n_points)
        NaN where missing.
    block : ndarray of int, shape (n_points,)
        Points of one number have a baseline in common; empty for one block.
    """

    x: FloatArray
    value: FloatArray
    error: FloatArray
    block: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))


def finish(
    table: ValueTable,
    model: Model,
    columns: Columns,
    *,
    caution: NDArray[np.bool_],
    left_out: tuple[str, ...],
) -> Prepared:
    """Leave out empty rows, fill errors in.

    Parameters
    ----------
    table : ValueTable
        Whose rows they are.
    model : Model
        What is to be fitted.
    columns : Columns
        The points kept.
    caution : ndarray of bool, shape (n_points,)
        Points to be taken with caution.
    left_out : tuple of str
        Phrases on points left out.

    Returns
    -------
    Prepared
        Ready to be fitted.

    Raises
    ------
    UnusableProfileError
        If no site has a value, or no error can be had.
    """
    rows = np.nonzero(np.isfinite(columns.value).any(axis=1))[0]
    if not len(rows):
        raise UnusableProfileError(
            table.names[0], "no site has a value", "check the column of the values"
        )
    names = site_names(table)
    value, error = columns.value[rows], columns.error[rows]
    given = replace(columns, value=value, error=error)
    filled, note = _fill_errors(given, model)
    profiles = Profiles(
        name=tuple(names[row] for row in rows),
        x=columns.x,
        value=value,
        error=filled,
        block=columns.block,
    )
    return Prepared(
        profiles=profiles,
        model=model,
        caution=caution,
        left_out=left_out,
        row=rows,
        notes=(note,) if note else (),
    )


def _fill_errors(columns: Columns, model: Model) -> tuple[FloatArray, str]:
    """Return errors without gaps, and a sentence on what was done."""
    value, error = columns.value, columns.error
    missing = np.isfinite(value) & ~(error > 0)
    if not missing.any():
        return error, ""
    given = error[np.isfinite(value) & (error > 0)]
    if len(given):
        common = float(np.median(given))
        note = f"{missing.sum()} values have no error; they take the median {common:g}."
        return np.where(missing, common, error), note
    names = tuple(str(row) for row in range(len(value)))
    plain = Profiles(
        name=names,
        x=columns.x,
        value=value,
        error=np.ones_like(value),
        block=columns.block,
    )
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


def checked_x(table: ValueTable, profile: Quantity, model: Model) -> FloatArray:
    """Return x in the base unit of the model, or refuse it.

    Parameters
    ----------
    table : ValueTable
        Names the file.
    profile : Quantity
        Of that table.
    model : Model
        Says unit and lowest x.

    Returns
    -------
    ndarray of float, shape (n_points,)
        In the base unit.

    Raises
    ------
    UnusableProfileError
        If x is too low or stands twice.
    UnknownUnitError
        If x has no unit that fits the model.
    """
    where = name_place(table, profile)
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
    return x


def refuse_few_points(where: str, n_points: int, model: Model) -> None:
    """Refuse profiles with no more points than parameters.

    Parameters
    ----------
    where : str
        File and quantity.
    n_points : int
        Points of a profile.
    model : Model
        What is to be fitted.

    Raises
    ------
    UnusableProfileError
        If there are too few.
    """
    if n_points <= model.n_own + model.n_shared and model.baseline != "none":
        raise UnusableProfileError(
            where,
            f"{n_points} points for {model.n_own + model.n_shared} parameters a site",
            f"{model.name} needs at least {model.min_points} points",
        )


def name_place(table: ValueTable, profile: Quantity) -> str:
    """Return file and axis of a profile, to name them in an error.

    Parameters
    ----------
    table : ValueTable
        Names the file.
    profile : Quantity
        Of that table.

    Returns
    -------
    str
        For example ``rates.csv, x of R1rho``.
    """
    return f"{table.names[0]}, {profile.x_name or 'x'} of {profile.name}"


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
