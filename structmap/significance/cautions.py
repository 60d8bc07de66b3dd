"""What the reader must know before believing units, one sentence each."""

import numpy as np

from structmap.behaviour import Behaviour, Measurements
from structmap.motional_units.search import UnitSearch
from structmap.significance.judging import Judgement
from structmap.significance.verdict import LEVEL

MOST_MOVING = 0.3
LARGE_SCALE, SMALL_SCALE = 2.0, 0.5
FEW_SITES = 50

# Cutoffs over which stability is tested, as steps from the chosen one in Å.
STEPS_ANGSTROM = (-0.5, 0.0, 0.5, 1.5)
STEPS_CA_ANGSTROM = (-1.0, 0.0, 0.5, 1.5)


def cutoffs_to_vary(
    cutoff_angstrom: float, *, ca_only: bool = False
) -> tuple[float, ...]:
    """Return the cutoffs over which the stability of units is tested.

    Parameters
    ----------
    cutoff_angstrom : float
        The chosen cutoff in Å.
    ca_only : bool
        Whether it is one between CA atoms.

    Returns
    -------
    tuple of float
        In Å, rising, the chosen one among them.
    """
    steps = STEPS_CA_ANGSTROM if ca_only else STEPS_ANGSTROM
    return tuple(cutoff_angstrom + step for step in steps)


def describe_error_scale(behaviour: Behaviour, measurements: Measurements) -> str:
    """Return whether the errors given fit the scatter of the values.

    Parameters
    ----------
    behaviour : Behaviour
        Holds the scale.
    measurements : Measurements
        What was compared.

    Returns
    -------
    str
        A sentence with what may be wrong and what to do; blank where the scale is from
        0.5 to 2 or no errors were given.
    """
    scale = behaviour.error_scale
    if not measurements.errors_given or not scale > 0:
        return ""
    if scale > LARGE_SCALE:
        remedy = (
            "or baselines differ from site to site: compare shapes (--profile-part "
            "shape)"
            if measurements.is_profile and measurements.part != "shape"
            else "or most sites move and the baseline is wrong: give it (--baseline)"
        )
        return (
            f"The values scatter {scale:.1f} times as much as their errors say: the "
            f"errors are stated too small, {remedy}."
        )
    if scale < SMALL_SCALE:
        return (
            f"The values scatter only {scale:.2f} times as much as their errors say: "
            "the errors are stated too large."
        )
    return ""


def list_cautions(
    search: UnitSearch, judgement: Judgement | None = None
) -> tuple[str, ...]:
    """Return what limits the answer, the most important first.

    Parameters
    ----------
    search : UnitSearch
        What was found.
    judgement : Judgement or None
        What the tests say; None when there were none.

    Returns
    -------
    tuple of str
        One sentence each; empty when nothing stands out, and when no unit can be told
        at all, which `UnitSearch.reason` says.
    """
    if search.reason:
        return ()
    found = [_say_movers(search), _say_few(search)]
    if judgement is not None:
        found += [
            _say_chance(search, judgement),
            _say_tentative(judgement),
            _say_shared(judgement),
        ]
    return tuple(one for one in found if one)


def _say_movers(search: UnitSearch) -> str:
    share = float(np.mean(search.behaviour.moves | (search.label >= 0)))
    if share <= MOST_MOVING:
        return ""
    return (
        f"{share:.0%} of the sites move or are in units: the baseline may be wrong and "
        "permutation tests lose their power; give a baseline if one is known "
        "(--baseline)."
    )


def _say_few(search: UnitSearch) -> str:
    n_sites = len(search.label)
    if n_sites >= FEW_SITES:
        return ""
    return (
        f"Only {n_sites} sites are measured: a curved trend over the fold cannot be "
        "told from units, and small units cannot be shown."
    )


def _say_chance(search: UnitSearch, judgement: Judgement) -> str:
    if not search.members or judgement.p_any <= LEVEL:
        return ""
    return (
        f"Values put on random sites make units as good as these in "
        f"{judgement.p_any:.0%} of the cases, so none of them is shown."
    )


def _say_tentative(judgement: Judgement) -> str:
    if all(unit.verdict != "tentative" for unit in judgement.units):
        return ""
    return "Tentative means not shown by these data; it does not mean absent."


def _say_shared(judgement: Judgement) -> str:
    if not judgement.shared_null:
        return ""
    return (
        "Because there are many sites, all units were held against one set of random "
        "placements with all values in it, which is on the safe side."
    )
