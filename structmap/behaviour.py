"""How measured sites behave: the baseline, the error scale, who moves."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from structmap.errors import UnknownQuantityError
from structmap.records import store_read_only
from structmap.settings import ProfilePart
from structmap.sites import Sites
from structmap.values import Quantity, ValueTable

# A site that lacks more than this share of the points of a profile is not measured.
MISSING_SHARE = 1 / 3
# An interpolated point of a profile counts as known this many times less well.
INTERPOLATED_ERROR = 2.0

Part = Literal["whole", "shape", "level"]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Measurements:
    """What is compared between sites: values and errors of the chosen quantities.

    Attributes
    ----------
    site : ndarray of int, shape (n,)
        Rising indices into the sites of the match: those with a residue and enough
        values.
    value, error : ndarray of float, shape (n, n_columns)
        In the units of the table, after `part` was taken; missing points of a profile
        interpolated with doubled error; NaN where a separate quantity is missing.
    column : tuple of str
        What each column is (``R1rho at 5 kHz``, ``R2``).
    is_profile : bool
        Whether the columns are points of one profile.
    part : str
        ``whole``, ``shape`` or ``level``.
    errors_given : bool
        False when no errors were given and all are 1.
    point_kept : ndarray of bool, shape (n_points,)
        For a profile, which of the table's points are compared; empty otherwise.
    point_reason : tuple of str
        For a profile, why a point is left out; blank where it is kept.
    notes : tuple of str
        What was mended, one sentence each.
    n_baselines : int
        Baselines of its own taken off each site, a degree of freedom each.
    name, unit : str
        The quantity (the first of several) and its unit of measurement.
    """

    site: NDArray[np.int64]
    value: NDArray[np.float64]
    error: NDArray[np.float64]
    column: tuple[str, ...]
    is_profile: bool
    part: str
    errors_given: bool
    point_kept: NDArray[np.bool_]
    point_reason: tuple[str, ...]
    notes: tuple[str, ...]
    n_baselines: int = 0
    name: str = ""
    unit: str = ""

    def __post_init__(self) -> None:
        store_read_only(self, "site", np.int64, (None,))
        store_read_only(self, "value", np.float64, (len(self.site), len(self.column)))
        store_read_only(self, "error", np.float64, self.value.shape)
        store_read_only(self, "point_kept", np.bool_, (len(self.point_reason),))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Behaviour:
    """Baseline, error scale and deviations; arrays run over `Measurements.site`.

    Attributes
    ----------
    background : ndarray of float, shape (n, n_columns)
        The molecule's baseline at each site, in the units of `Measurements.value`.
    degree : int
        Degree of the spatial trend in it: 0 for one value for all.
    trend_share : float
        Share of the variance of the values that the trend takes; 0 for degree 0.
    error_scale : float
        Factor by which the errors had to be multiplied to fit the scatter; with no
        errors given, the common error itself in units of the column scales.
    deviation : ndarray of float, shape (n,)
        Distance from the background in errors (root of the summed squares); signed
        for one column.
    p_deviation : ndarray of float, shape (n,)
        Its chance under the scaled errors.
    moves : ndarray of bool, shape (n,)
        Differs from the background beyond its errors.
    summary, summary_error : ndarray of float, shape (n,)
        The one number that stands for a site and its scaled error.
    summary_name, summary_unit : str
        What that number is (``span of R1rho``).
    edge_filter_unit : ndarray of int, shape (n,)
        Unit of the plain comparison method, 0 for none.
    """

    background: NDArray[np.float64]
    degree: int
    trend_share: float
    error_scale: float
    deviation: NDArray[np.float64]
    p_deviation: NDArray[np.float64]
    moves: NDArray[np.bool_]
    summary: NDArray[np.float64]
    summary_error: NDArray[np.float64]
    summary_name: str
    summary_unit: str
    edge_filter_unit: NDArray[np.int64]

    def __post_init__(self) -> None:
        n = len(self.deviation)
        store_read_only(self, "background", np.float64, (n, None))
        for name in ("deviation", "p_deviation", "summary", "summary_error"):
            store_read_only(self, name, np.float64, (n,))
        store_read_only(self, "moves", np.bool_, (n,))
        store_read_only(self, "edge_filter_unit", np.int64, (n,))


def take_measurements(
    table: ValueTable,
    sites: Sites,
    *,
    quantity: tuple[str, ...] = (),
    profile_part: ProfilePart = "auto",
    model_name: str = "",
    point_reason: tuple[str, ...] = (),
) -> Measurements:
    """Pick what is compared between sites.

    Parameters
    ----------
    table : ValueTable
        The values as read.
    sites : Sites
        Which rows of the table lie on which residues.
    quantity : tuple of str
        Quantities to compare; empty takes all that have errors, else the first.
    profile_part : {'auto', 'whole', 'shape', 'level'}
        What of a profile is compared: the values as they are; the values less each
        site's own mean; or that mean alone. ``auto`` is ``shape`` when the profiles
        follow a named model, because baselines then differ from site to site, else
        ``whole``.
    model_name : str
        Name of the model that the profiles follow; blank for none.
    point_reason : tuple of str
        Why each point of the (first) profile is left out, blank where it is kept;
        empty keeps all points.

    Returns
    -------
    Measurements
        Sites with a residue and enough values, in the order of `sites`.

    Raises
    ------
    UnknownQuantityError
        If the table has no quantity of that name.
    ValueError
        If `point_reason` does not fit the profile.
    """
    chosen = choose_quantities(table, quantity)
    rows = sites.row[sites.residue >= 0]
    kept = _kept_points(chosen, point_reason)
    part = _choose_part(chosen, profile_part, model_name, int(kept.sum()))
    errors_given = any(one.has_errors for one in chosen)
    notes: list[str] = []
    first_profile = next((one for one in chosen if _is_profile(one)), None)
    columns = [
        _take_quantity(
            one,
            rows,
            kept=kept if one is first_profile else np.ones(len(one.x), bool),
            part=part,
            notes=notes,
            errors_given=errors_given,
        )
        for one in chosen
    ]
    value = np.concatenate([one.value for one in columns], axis=1)
    error = np.concatenate([one.error for one in columns], axis=1)
    measured = np.isfinite(value).any(1)
    only = chosen[0] if len(chosen) == 1 else None
    is_profile = only is not None and _is_profile(only)
    reasons = point_reason if len(kept) else ()
    return Measurements(
        site=np.flatnonzero(sites.residue >= 0)[measured],
        value=value[measured],
        error=error[measured],
        column=tuple(name for one in columns for name in one.column),
        is_profile=is_profile,
        part=part,
        errors_given=errors_given,
        point_kept=kept,
        point_reason=reasons or ("",) * len(kept),
        notes=tuple(notes),
        n_baselines=sum(one.n_baselines for one in columns),
        name=chosen[0].name,
        unit=chosen[0].unit,
    )


def choose_quantities(
    table: ValueTable, names: tuple[str, ...] = ()
) -> tuple[Quantity, ...]:
    """Return the quantities that are compared between sites.

    Parameters
    ----------
    table : ValueTable
        The values as read.
    names : tuple of str
        Quantities to take; empty takes all that have errors, else the first.

    Returns
    -------
    tuple of Quantity
        In the order asked for, else in that of the table.

    Raises
    ------
    UnknownQuantityError
        If the table has no quantity of that name.
    """
    known = {one.name: one for one in table.quantities}
    for name in names:
        if name not in known:
            raise UnknownQuantityError(" and ".join(table.names), name, tuple(known))
    if names:
        return tuple(known[name] for name in dict.fromkeys(names))
    with_errors = tuple(one for one in table.quantities if one.has_errors)
    return with_errors or table.quantities[:1]


def _is_profile(quantity: Quantity) -> bool:
    return len(quantity.x) > 0


def _kept_points(
    chosen: tuple[Quantity, ...], reasons: tuple[str, ...]
) -> NDArray[np.bool_]:
    """Tell which points of the first profile are compared; empty without one."""
    profiles = [one for one in chosen if _is_profile(one)]
    if not profiles:
        return np.zeros(0, bool)
    n_points = len(profiles[0].x)
    if reasons and len(reasons) != n_points:
        raise ValueError(f"point_reason has {len(reasons)} entries; need {n_points}")
    return np.array([not reason for reason in reasons] or [True] * n_points)


def _choose_part(
    chosen: tuple[Quantity, ...], asked: ProfilePart, model_name: str, n_kept: int
) -> Part:
    profiles = [one for one in chosen if _is_profile(one)]
    if not profiles or (len(profiles) == 1 and n_kept < 2):
        return "whole"
    if asked == "auto":
        return "shape" if model_name else "whole"
    return asked


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Columns:
    """Columns that one quantity brings."""

    value: NDArray[np.float64]
    error: NDArray[np.float64]
    column: tuple[str, ...]
    n_baselines: int


def _take_quantity(
    quantity: Quantity,
    rows: NDArray[np.int64],
    *,
    kept: NDArray[np.bool_],
    part: Part,
    notes: list[str],
    errors_given: bool,
) -> _Columns:
    value = quantity.value[rows]
    error = _fill_errors(quantity, rows, notes) if errors_given else np.ones_like(value)
    if not _is_profile(quantity):
        return _Columns(
            value=value,
            error=np.where(np.isfinite(value), error, np.nan),
            column=(quantity.name,),
            n_baselines=0,
        )
    value, error = _fill_profiles(quantity, value[:, kept], error[:, kept], kept, notes)
    return _take_part(quantity, value, error, points=kept, part=part)


def _fill_errors(
    quantity: Quantity, rows: NDArray[np.int64], notes: list[str]
) -> NDArray[np.float64]:
    """Give values without an error the common one: the median of those given."""
    value, error = quantity.value[rows], quantity.error[rows].copy()
    bare = np.isfinite(value) & ~np.isfinite(error)
    given = error[np.isfinite(value) & np.isfinite(error)]
    if not len(given):
        return np.ones_like(value)
    error[~np.isfinite(error)] = np.median(given)
    if bare.any():
        notes.append(
            f"{int(bare.sum())} values of {quantity.name} have no error; each takes "
            f"the median error, {np.median(given):.4g}."
        )
    return error


def _fill_profiles(
    quantity: Quantity,
    value: NDArray[np.float64],
    error: NDArray[np.float64],
    points: NDArray[np.bool_],
    notes: list[str],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Interpolate missing points; set profiles that lack too many to NaN."""
    value, error = value.copy(), error.copy()
    x = quantity.x[points]
    there = np.isfinite(value)
    n_points = max(value.shape[1], 1)
    lacking = (~there).sum(1) > MISSING_SHARE * n_points
    value[lacking], error[lacking] = np.nan, np.nan
    mended = np.flatnonzero(~lacking & ~there.all(1))
    for row in mended:
        known = there[row]
        value[row, ~known] = np.interp(x[~known], x[known], value[row, known])
        nearby = np.interp(x[~known], x[known], error[row, known])
        error[row, ~known] = INTERPOLATED_ERROR * nearby
    if len(mended):
        count = int((~there[mended]).sum())
        notes.append(
            f"{count} missing points of {quantity.name} at {len(mended)} sites were "
            "interpolated with doubled error."
        )
    part_of = lacking & there.any(1)
    if part_of.any():
        notes.append(
            f"{int(part_of.sum())} sites lack more than a third of the points of "
            f"{quantity.name} and count as not measured."
        )
    return value, error


def _take_part(
    quantity: Quantity,
    value: NDArray[np.float64],
    error: NDArray[np.float64],
    *,
    points: NDArray[np.bool_],
    part: Part,
) -> _Columns:
    weight = error**-2.0
    total = weight.sum(1, keepdims=True)
    mean = (weight * value).sum(1, keepdims=True) / np.where(total > 0, total, np.nan)
    if part == "level":
        return _Columns(
            value=mean,
            error=1 / np.sqrt(total),
            column=(f"level of {quantity.name}",),
            n_baselines=0,
        )
    unit = f" {quantity.x_unit}" if quantity.x_unit else ""
    return _Columns(
        value=value - mean if part == "shape" else value,
        error=error,
        column=tuple(f"{quantity.name} at {x:g}{unit}" for x in quantity.x[points]),
        n_baselines=int(part == "shape"),
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SiteSummary:
    """The one number that stands for each site.

    Attributes
    ----------
    value, error : ndarray of float, shape (n,)
        In the unit of the quantity; the error is scaled.
    name, unit : str
        What it is.
    """

    value: NDArray[np.float64]
    error: NDArray[np.float64]
    name: str
    unit: str


def summarise_sites(
    measurements: Measurements, background: NDArray[np.float64], *, error_scale: float
) -> SiteSummary:
    """Return the one number that stands for each site in bars and tables.

    Parameters
    ----------
    measurements : Measurements
        What is compared.
    background : ndarray of float, shape (n, n_columns)
        Baseline at each site.
    error_scale : float
        Factor that errors are multiplied by.

    Returns
    -------
    SiteSummary
        For a profile compared by its shape the span: mean of the first quarter of the
        points less that of the last, with the sign that makes the largest spans
        positive. Else the inverse-variance mean over the points, less the baseline;
        of several separate quantities the first, NaN where it is missing.
    """
    if measurements.part == "shape" and measurements.is_profile:
        return _span(measurements, error_scale)
    columns = slice(None) if measurements.is_profile else slice(0, 1)
    off = (measurements.value - background)[:, columns]
    weight = measurements.error[:, columns] ** -2.0
    total = weight.sum(1)
    name = (
        measurements.name
        if measurements.is_profile
        else "".join(measurements.column[:1])
    )
    return SiteSummary(
        value=(weight * off).sum(1) / np.where(total > 0, total, np.nan),
        error=error_scale / np.sqrt(np.where(total > 0, total, np.nan)),
        name=f"{name} less the baseline",
        unit=measurements.unit,
    )


def _span(measurements: Measurements, error_scale: float) -> SiteSummary:
    quarter = max(1, measurements.value.shape[1] // 4)
    value, variance = measurements.value, measurements.error**2
    span = value[:, :quarter].mean(1) - value[:, -quarter:].mean(1)
    spread = variance[:, :quarter].sum(1) + variance[:, -quarter:].sum(1)
    largest = np.argsort(-np.abs(span), kind="stable")[: max(1, len(span) // 10)]
    sign = -1.0 if span[largest].sum() < 0 else 1.0
    return SiteSummary(
        value=sign * span,
        error=error_scale * np.sqrt(spread) / quarter,
        name=f"span of {measurements.name}",
        unit=measurements.unit,
    )


def control_false_discovery(p_values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return p values adjusted to bound the share of false discoveries.

    Parameters
    ----------
    p_values : ndarray of float, shape (n,)
        Chances of single sites.

    Returns
    -------
    ndarray of float, shape (n,)
        Adjusted; those at most q hold a share q of false discoveries on average.

    References
    ----------
    .. [1] Benjamini and Hochberg, J. R. Stat. Soc. B 57, 289-300 (1995).
    """
    n = len(p_values)
    order = np.argsort(-p_values, kind="stable")
    adjusted = p_values[order] * n / np.arange(n, 0, -1)
    out = np.empty(n)
    out[order] = np.minimum(1.0, np.minimum.accumulate(adjusted))
    return out
