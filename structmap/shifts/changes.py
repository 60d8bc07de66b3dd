"""Changes of shifts: several nuclei combined, and what counts as a change."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from structmap.records import store_read_only

FloatArray = NDArray[np.float64]

WARN_RATIO = 1.5
_MEDIAN_SHARE = float(np.sqrt(np.log(2)))
"""Median of the length of a two-dimensional normal vector over its root mean square."""
_DROP, _SIGNIFICANT, _STRONG = 3.0, 2.0, 3.0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Threshold:
    """What counts as a shift change, from the bulk of the sites.

    Attributes
    ----------
    sigma : float
        Spread of the sites that do not change, by repeated dropping of changes above
        three times it (corrected deviation to zero).
    median_sigma : float
        The same from the median, which holds while fewer than half of the sites change.
    kept : ndarray of bool, shape (n_sites,)
        Sites that make up `sigma`.
    warns : bool
        `sigma` is more than 1.5 times the median-based one: many sites change and it
        must not be used.
    used : float
        The one of the two that is used.
    """

    sigma: float
    median_sigma: float
    kept: NDArray[np.bool_]
    warns: bool
    used: float

    def __post_init__(self) -> None:
        store_read_only(self, "kept", np.bool_, (None,))

    @property
    def significant(self) -> float:
        """Return the change that two Gaussian components exceed in 1.8 % of cases.

        Returns
        -------
        float
            Twice the spread.
        """
        return _SIGNIFICANT * self.used

    @property
    def strong(self) -> float:
        """Return the change that two Gaussian components exceed in 0.012 % of cases.

        Returns
        -------
        float
            Three times the spread.
        """
        return _STRONG * self.used


def combine_changes(changes: ArrayLike, weights: ArrayLike) -> FloatArray:
    """Return the combined change of several nuclei.

    Parameters
    ----------
    changes : array_like, shape (..., n_nuclei)
        Changes in ppm.
    weights : array_like
        Weight of each nucleus, broadcast against the changes; 1 for the proton.

    Returns
    -------
    ndarray, shape (...)
        Root of the mean of the squared weighted changes, in ppm.

    References
    ----------
    .. [1] Williamson, Prog. NMR Spectrosc. 73, 1 (2013).
    """
    weighted = np.asarray(changes, dtype=np.float64) * np.asarray(weights)
    return np.asarray(np.sqrt((weighted**2).mean(axis=-1)))


def find_threshold(changes: ArrayLike) -> Threshold:
    """Return what counts as a change, robust against many sites that change.

    Parameters
    ----------
    changes : array_like, shape (n_sites,)
        Combined changes; NaN where missing.

    Returns
    -------
    Threshold
        With both spreads and a warning where they disagree.

    Raises
    ------
    ValueError
        If no change is known.

    Notes
    -----
    Changes above three times the root mean square of those kept are dropped until
    nothing is dropped [1]_. When more than a ninth of all sites change strongly and
    alike, none of them is ever dropped; the median-based spread shows that.

    References
    ----------
    .. [1] Schumann et al., J. Biomol. NMR 39, 275 (2007).
    """
    change = np.asarray(changes, dtype=np.float64)
    known = np.isfinite(change)
    if not known.any():
        raise ValueError("changes holds no known change")
    kept = known.copy()
    while True:
        sigma = float(np.sqrt(np.mean(change[kept] ** 2)))
        fewer = kept & ~(np.nan_to_num(change) > _DROP * sigma)
        if (fewer == kept).all():
            break
        kept = fewer
    median_sigma = float(np.median(change[known])) / _MEDIAN_SHARE
    warns = sigma > WARN_RATIO * median_sigma
    return Threshold(
        sigma=sigma,
        median_sigma=median_sigma,
        kept=kept,
        warns=warns,
        used=median_sigma if warns else sigma,
    )
