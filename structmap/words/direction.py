"""Which way a quantity points: of some, a low value means motion."""

import re

import numpy as np

from structmap.result import AnalysisRecord, MotionalUnit
from structmap.words.head import grouped_quantities
from structmap.words.names import listing

_FIELD = r"(?:[_ ]?\d+(?:\.\d+)?(?:[_ ]?MHz)?)?(?:_\d+)?$"
_LOW_MOVES = re.compile(
    rf"^(?:S2|S\^2|S²|order[_ ]?param(?:eter)?|(?:het(?:eronucl(?:ear)?)?[_ ]?)?NOE|"
    rf"(?:log[_ ]?)?(?:protection[_ ]?factor|PF)){_FIELD}",
    re.IGNORECASE,
)


def low_quantities(record: AnalysisRecord) -> tuple[str, ...]:
    """Return the quantities of the grouping of which a low value means motion.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        Those that the settings name, order parameters, heteronuclear NOE and
        protection factors.
    """
    named = record.settings.low_moves
    return tuple(
        name
        for name in grouped_quantities(record)
        if name in named or _LOW_MOVES.match(name)
    )


def direction_sentence(record: AnalysisRecord) -> str:
    """Return the direction of such quantities in a sentence, blank without any.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        It also says that the statistics count both ways alike.
    """
    low = low_quantities(record)
    if not low:
        return ""
    return (
        f"Of {listing(low)} a low value means motion; only the words follow that, the "
        "tests count both ways alike."
    )


def direction_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return which way a unit deviates where that is known to mean motion or rest.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        Blank unless one single quantity is compared of which low values mean motion.
    """
    low = low_quantities(record)
    measurements = record.measurements
    if len(measurements.column) != 1 or not low:
        return ""
    inside = np.isin(measurements.site, unit.members)
    if float(np.median(record.behaviour.deviation[inside])) < 0:
        return f"{low[0]} lower than the baseline: moves more"
    return f"{low[0]} higher than the baseline: moves less"
