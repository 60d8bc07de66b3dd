"""What the reader must know before using the result."""

import numpy as np

from structmap.result import AnalysisRecord
from structmap.significance import describe_error_scale
from structmap.words.beside import other_part_sentences
from structmap.words.limits import coverage_sentences
from structmap.words.names import (
    listing,
    measured_residues,
    number_in_words,
    residues_in_view,
)
from structmap.words.packing import packing_cautions, sample_sentence


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
    found = (
        sample_sentence(record),
        *_care_errors(record),
        *_care_numbering(record),
        describe_error_scale(record.behaviour, record.measurements),
        *_care_crystal(record),
        *packing_cautions(record),
        *_care_points(record),
        *_care_unmeasured(record),
        *_care_atoms(record),
        *_care_others(record),
    )
    return tuple(dict.fromkeys(sentence for sentence in found if sentence))


def _care_errors(record: AnalysisRecord) -> list[str]:
    if record.measurements.errors_given:
        return []
    errors = record.behaviour.summary_error
    error = float(np.median(errors[np.isfinite(errors)])) if len(errors) else 0.0
    if not error > 0:
        return ["The values came without errors, and none could be estimated."]
    size = f"{error:.3g}\u00a0{record.behaviour.summary_unit}".rstrip()
    return [
        f"The values came without errors; one common error of {size} was estimated "
        "from their scatter, and every statement below rests on it."
    ]


def _care_numbering(record: AnalysisRecord) -> list[str]:
    """Say what was done to the numbering, and how that was found."""
    sites, name = record.sites, record.structure.name
    told = [note for note in sites.notes if _is_on_numbering(note)]
    for chain in sites.chains:
        uneven = any(
            note.startswith(f"Chain {chain.auth_asym_id} was aligned") for note in told
        )
        if chain.how == "sequence" and chain.offset and not uneven:
            told.append(
                f"The numbers of the values are not those of {name}; residue names "
                f"laid them on chain {chain.auth_asym_id} with offset "
                f"{chain.offset:+d} ({chain.n_agreeing} of {chain.n_named} names "
                "agree)."
            )
    return told


def _is_on_numbering(note: str) -> bool:
    return "ffset" in note


def _care_crystal(record: AnalysisRecord) -> list[str]:
    structure = record.structure
    if structure.crystal is None:
        return [
            "There is no crystal to ask about, because "
            f"{structure.no_crystal_reason}; contacts "
            "are those inside the molecule or assembly."
        ]
    if record.packing.sample is not None:
        return []
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


def _care_atoms(record: AnalysisRecord) -> list[str]:
    if not record.structure.ca_only:
        return []
    return [
        "The coordinates hold CA atoms alone, so contacts are CA pairs within "
        f"{record.settings.ca_cutoff_angstrom:g}\u00a0Å."
    ]


def _care_others(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what comes after all that the head of the page has room for."""
    notes = [note for note in record.sites.notes if not _is_on_numbering(note)]
    return (
        *other_part_sentences(record),
        *record.warnings,
        *coverage_sentences(record),
        *notes,
        *record.measurements.notes,
    )
