"""What the reader must know before using the result."""

import numpy as np

from structmap.result import AnalysisRecord
from structmap.words.names import (
    listing,
    measured_residues,
    number_in_words,
    residues_in_view,
)


def care_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what the reader must know, the most important first.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        One sentence each; the page shows the first three in its head.
    """
    found = [
        *_care_errors(record),
        *record.sites.notes,
        *record.warnings,
        *_care_crystal(record),
        *_care_points(record),
        *_care_unmeasured(record),
    ]
    if record.structure.ca_only:
        found.append(
            "The coordinates hold CA atoms alone, so contacts are CA pairs within "
            f"{record.settings.ca_cutoff_angstrom:g}\u00a0Å."
        )
    return tuple(dict.fromkeys(found))


def _care_errors(record: AnalysisRecord) -> list[str]:
    if record.measurements.errors_given:
        return []
    error = float(np.median(record.behaviour.summary_error))
    size = f"{error:.3g}\u00a0{record.behaviour.summary_unit}".rstrip()
    return [
        f"The values came without errors; one common error of {size} was estimated "
        "from their scatter, and every statement below rests on it."
    ]


def _care_crystal(record: AnalysisRecord) -> list[str]:
    structure = record.structure
    if structure.crystal is None:
        return [
            "There is no crystal to ask about, because "
            f"{structure.no_crystal_reason}; contacts "
            "are those inside the molecule or assembly."
        ]
    return [
        f"A statement about the crystal holds for {structure.name}; whether the "
        "measured "
        "sample packs in the same way cannot be told from these data."
    ]


def _care_points(record: AnalysisRecord) -> list[str]:
    reasons = [reason for reason in record.measurements.point_reason if reason]
    if not reasons:
        return []
    total = len(record.measurements.point_reason)
    verb = "is" if len(reasons) == 1 else "are"
    return [
        f"{number_in_words(len(reasons)).capitalize()} of {number_in_words(total)} "
        "points a "
        f"profile {verb} left out: {listing(dict.fromkeys(reasons))}."
    ]


def _care_unmeasured(record: AnalysisRecord) -> list[str]:
    missing = residues_in_view(record) - measured_residues(record)
    if missing <= 0:
        return []
    noun, verb, state = (
        ("residue", "was", "is") if missing == 1 else ("residues", "were", "are")
    )
    count = number_in_words(missing).capitalize()
    return [f"{count} {noun} {verb} not measured and {state} not taken for rigid."]
