"""How measured sites behave: the baseline, the error scale, who moves."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only


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
