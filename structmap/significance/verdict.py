"""The verdict on a unit, one word."""

from typing import Literal

LEVEL = 0.05
STABLE = 0.5
SHARP = 0.92

Verdict = Literal["supported", "beyond-gradient", "graded", "tentative"]


def choose_verdict(
    *,
    p_any: float,
    p_place: float,
    p_smooth: float,
    stability: float,
    contrast: float,
) -> Verdict:
    """Return the verdict on a unit.

    Parameters
    ----------
    p_any : float
        Chance of units as good as those found, taken together, when all values are
        put on random sites.
    p_place : float
        Chance of one unit as good as this one anywhere when the values are put on
        random sites, those of the other units left out.
    p_smooth : float
        The same when the values are placed as smoothly as they were measured.
    stability : float
        Mean overlap with the unit when errors are redrawn and the cutoff is varied.
    contrast : float
        1 less the share of the unit's profile that its neighbours show.

    Returns
    -------
    str
        ``supported`` when p_any and p_place are at most 0.05, stability at least 0.5
        and contrast at least 0.92; ``beyond-gradient`` when p_smooth is at most 0.05
        besides; ``graded`` when only the contrast falls short, for then the border is
        not sharp; else ``tentative``, which means not shown, not absent.
    """
    # Written so that a number that is not there (NaN) never counts in favour.
    shown = p_any <= LEVEL and p_place <= LEVEL and stability >= STABLE
    if not shown:
        return "tentative"
    if not contrast >= SHARP:
        return "graded"
    return "beyond-gradient" if p_smooth <= LEVEL else "supported"
