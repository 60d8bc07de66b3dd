"""What is said of assemblies, of the crystal of the sample, of the elastic network."""

import numpy as np
from numpy.typing import NDArray

from structmap.cell import DIFFERENT_CRYSTAL
from structmap.contacts import overlap_warning
from structmap.holding import NetworkEvidence
from structmap.quotient import extent_sentence
from structmap.result import AnalysisRecord
from structmap.structure import (
    LOW_CONFIDENCE,
    VERY_LOW_CONFIDENCE,
    Assembly,
    is_low_confidence,
    residue_confidence,
)
from structmap.words.holding import loose_sentences
from structmap.words.names import listing, number_in_words

UNSTATED = "of unstated origin"


def sample_sentence(record: AnalysisRecord) -> str:
    """Return that the sample is another crystal.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        Blank when it is not, or its crystal was not given.
    """
    sample = record.packing.sample
    if sample is None or sample.verdict != DIFFERENT_CRYSTAL:
        return ""
    return sample.sentence


def packing_facts(record: AnalysisRecord) -> tuple[str, ...]:
    """Return short lines on the assembly and the crystal of the sample.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        ``assembly 1 of the authors``, ``crystal of the sample: same lattice``.
    """
    lines = []
    chosen = record.packing.assemblies
    if chosen:
        noun = "assembly" if len(chosen) == 1 else "assemblies"
        lines.append(f"{noun} {listing(item.name for item in chosen)}, {_by(chosen)}")
    elif record.structure.crystal is not None:
        lines.append("each chain alone, no assembly")
    if record.packing.sample is not None:
        lines.append(f"crystal of the sample: {record.packing.sample.verdict}")
    return tuple(lines)


def _by(chosen: tuple[Assembly, ...]) -> str:
    if all(item.by_author for item in chosen):
        return "by the authors"
    if all(item.by_software for item in chosen):
        return "by software"
    return UNSTATED


def assembly_paragraph(record: AnalysisRecord) -> str:
    """Return which assembly made contacts complex, and how far it goes.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        One or two sentences.
    """
    packing, structure = record.packing, record.structure
    if packing.assemblies:
        text = _assembly_sentence(record)
    elif structure.crystal is None:
        text = "The file names no assembly; contacts between its chains are complex."
    elif structure.assemblies:
        text = (
            "No assembly was asked for: each chain alone is the molecule, and every "
            "other chain or image a neighbour in the lattice."
        )
    else:
        text = no_assembly_sentence(record)
    endless = endless_sentence(record)
    return f"{text} {endless}".rstrip()


def packing_cautions(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what limits statements about the crystal.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        What is odd about the file, molecules that overlap, low confidence, an endless
        assembly or none, a poorly ordered side chain.
    """
    found = (
        *record.structure.warnings,
        overlap_warning(record.structure, record.contacts),
        _confidence_sentence(record),
        endless_sentence(record),
        no_assembly_sentence(record),
        *loose_sentences(record),
    )
    return tuple(filter(None, found))


def _confidence_sentence(record: AnalysisRecord) -> str:
    if not record.structure.is_predicted:
        return ""
    low = is_low_confidence(record.structure)
    count = int(low.sum())
    of_units = np.zeros(len(low), dtype=np.bool_)
    for unit in record.units:
        own = np.isin(record.sites.copy_site, unit.members)
        of_units[record.sites.copy_residue[own]] = True
    n_inside = int((low & of_units).sum())
    if not count:
        return "The coordinates are a predicted model, confident in every residue."
    noun = "residue has" if count == 1 else "residues have"
    inside = f", {number_in_words(n_inside)} of them in units" if n_inside else ""
    return (
        f"The coordinates are a predicted model: {number_in_words(count)} {noun} a "
        f"confidence below {LOW_CONFIDENCE:g}{inside}; contacts to them are weak, but "
        f"for the bonds of the chain.{_unreadable(record)}"
    )


def _unreadable(record: AnalysisRecord) -> str:
    """Say which residues are too uncertain to join units."""
    low = is_low_confidence(record.structure)
    very = low & (residue_confidence(record.structure) < VERY_LOW_CONFIDENCE)
    if not very.any():
        return ""
    count = int(very.sum())
    which = f"{number_in_words(count).capitalize()} of them"
    if (very == low).all():
        which = "It" if count == 1 else "They"
    verb = "is" if count == 1 else "are"
    return (
        f" {which} {verb} below {VERY_LOW_CONFIDENCE:g}, where a prediction is not to "
        "be interpreted: nothing but the chain joins such residues to a unit."
    )


def confidence_note(record: AnalysisRecord, residue: int) -> str:
    """Return that a residue of a predicted model is uncertain.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    residue : int
        Index of a residue.

    Returns
    -------
    str
        ``predicted with low confidence (54)``; blank in other files.
    """
    if not record.structure.is_predicted:
        return ""
    confidence = residue_confidence(record.structure)[residue]
    if not confidence < LOW_CONFIDENCE:
        return ""
    return f"predicted with low confidence ({confidence:.0f})"


def no_assembly_sentence(record: AnalysisRecord) -> str:
    """Return that a crystal comes without any assembly.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        Blank when there is no crystal or an assembly is listed.
    """
    structure = record.structure
    if structure.crystal is None or structure.assemblies:
        return ""
    return (
        f"{structure.name} names no assembly: each chain alone is taken for the "
        "molecule, and every other chain or image for a neighbour in the lattice."
    )


def _assembly_sentence(record: AnalysisRecord) -> str:
    chosen = record.packing.assemblies
    named = listing(_described(record, item) for item in chosen)
    by = _by(chosen)
    named += f", {by}," if by == UNSTATED else f", determined {by},"
    noun, verb = ("assembly", "is") if len(chosen) == 1 else ("assemblies", "are")
    others = len(record.structure.assemblies) - len(chosen)
    left = f" Of {others + len(chosen)} that the file lists" if others else ""
    if left:
        return (
            f"{left.strip()} {noun} {named} {verb} used; contacts within are complex."
        )
    return f"Contacts within {noun} {named} are complex."


def _described(record: AnalysisRecord, item: Assembly) -> str:
    n_chains = sum(len(names) for names in item.chains)
    n_here = len(record.structure.chain_copies)
    size = ""
    if n_chains != n_here and record.structure.crystal is not None:
        size = "larger" if n_chains > n_here else "smaller"
        size += " than the asymmetric unit"
    told = ", ".join(part for part in (item.oligomer, size) if part)
    return f"{item.name} ({told})" if told else item.name


def endless_sentence(record: AnalysisRecord) -> str:
    """Return that the assembly is a slice of something endless.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        Blank when it is finite.
    """
    if not record.packing.assemblies:
        return ""
    return extent_sentence(record.packing.extent)


def network_paragraph(record: AnalysisRecord) -> str:
    """Return what the elastic network says, labelled as a model.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        Blank when it was not asked.
    """
    network = record.packing.network
    if network is None:
        return ""
    sentences = [
        "Evidence of a model, which sets no verdict: an elastic network of equal "
        "springs between CA (P) atoms within 7.3\u00a0Å",
        _agreement(record, network),
    ]
    followed = network.followed.follows
    if record.structure.crystal is not None:
        told = {"undecided": "either profile equally well, as far as can be told"}
        sentences.append(
            "The measured departures from the baseline follow "
            + told.get(followed, f"its profile of the {followed}")
        )
        sentences += _damping(record, network)
    for unit, together in zip(record.units, network.together, strict=True):
        if together is not None and np.isfinite(together.p_value):
            sentences.append(
                f"In the slow modes of the assembly {unit.name} moves with a mean "
                f"correlation of {together.correlation:.2f}, random groups as compact "
                f"with {together.random_mean:.2f} (p\u00a0{together.p_value:.2f})"
            )
    text = " ".join(f"{sentence}." for sentence in sentences if sentence)
    return text.replace(" -0", " −0")


def _agreement(record: AnalysisRecord, network: NetworkEvidence) -> str:
    if record.structure.is_predicted:
        return ""
    names = {"isolated": "alone", "assembly": "in the assembly"}
    if record.structure.crystal is not None:
        names["crystal"] = "in the crystal"
    found = {
        word: network.agreement[name].pearson
        for name, word in names.items()
        if np.isfinite(network.agreement[name].pearson)
    }
    if not found:
        return "The B factors of the file do not vary, so it cannot be checked on them"
    parts = [f"{r:.2f} {word}" for word, r in found.items()]
    return f"Correlation with the B factors: {listing(parts)}"


def _damping(record: AnalysisRecord, network: NetworkEvidence) -> list[str]:
    inside = record.unit_of_site() >= 0
    others = _median(network.site_damping[~inside])
    parts = [
        f"{_median(network.site_damping[unit.members]):.2f} for {unit.name}"
        for unit in record.units
        if np.isfinite(_median(network.site_damping[unit.members]))
    ]
    if not parts:
        return []
    rest = (
        f" against {others:.2f} for the other residues" if np.isfinite(others) else ""
    )
    return [f"Packing leaves this share of the fluctuation: {listing(parts)}{rest}"]


def _median(values: NDArray[np.float64]) -> float:
    known = values[np.isfinite(values)]
    return float(np.median(known)) if len(known) else float("nan")
