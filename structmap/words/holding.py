"""What is said of the contacts that hold a unit: link, area, ablation, sensitivity."""

from collections.abc import Sequence

import numpy as np

from structmap.holding import Hold
from structmap.quotient import directions
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.structure import LOW_CONFIDENCE, one_letter
from structmap.words.names import listing, number_in_words

NOUNS = {
    "disulfide": "disulfide bridge",
    "metal": "bridge by a metal",
    "cation-pi": "cation–π contact",
    "aromatic": "aromatic contact",
    "hydrophobic": "hydrophobic contact",
    "water bridge": "bridge by a water",
}
UNITS_TOLD = 6
IN_FILE = "x,y,z [0 0 0]"
BY_LATTICE = ("lattice-joined", "lattice-only")


def hold_lines(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return in short lines how weakly a unit is held and what that depends on.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    tuple of str
        Weakest link and area where neighbours in the crystal hold it; whether it
        closes, is marginal, or rests on a poorly ordered side chain.
    """
    hold = record.hold_of(unit)
    lines = []
    if unit.lattice.verdict in BY_LATTICE:
        lines.append(f"weakest link: {_kinds_phrase(hold)}")
        if np.isfinite(hold.buried_area):
            lines.append(f"{hold.buried_area:.0f}\u00a0Å² buried across the crystal")
    if hold.closes != "finite":
        lines.append(_closing(hold))
    if hold.is_marginal:
        lines.append(_marginal(unit))
    elif _changes(record, unit):
        lines.append(f"at other cutoffs: {_other_cutoffs(unit, hold)}")
    if hold.loose_residues:
        lines.append(f"rests on {_loose(record, hold)}")
    if hold.firm_pieces:
        lines.append(weak_phrase(unit, hold))
    return tuple(lines)


def weak_phrase(unit: MotionalUnit, hold: Hold) -> str:
    """Return that a unit hangs on residues predicted with low confidence.

    Parameters
    ----------
    unit : MotionalUnit
        The motional unit.
    hold : Hold
        What holds it.

    Returns
    -------
    str
        ``hangs together only by weak contacts, to residues predicted with low
        confidence: without them three of its five residues stay together``; blank when
        it does not.
    """
    if not hold.firm_pieces:
        return ""
    count, kept = len(unit.members), len(hold.firm_pieces[0])
    left = f"{number_in_words(kept)} of its {number_in_words(count)} residues stay"
    if kept == 1:
        left = f"none of its {number_in_words(count)} residues stay"
    return (
        "hangs together only by weak contacts, to residues predicted with low "
        f"confidence: without them {left} together"
    )


def closing_line(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return that a unit closes on itself or goes on without end.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        ``closes to a ring of three``; blank when it ends.
    """
    hold = record.hold_of(unit)
    return "" if hold.closes == "finite" else _closing(hold)


def link_phrase(hold: Hold) -> str:
    """Return the contacts of the weakest link in words.

    Parameters
    ----------
    hold : Hold
        What holds a unit.

    Returns
    -------
    str
        ``two hydrogen bonds and one close contact to the molecule at −x, y+1/2, −z``.
    """
    text = _kinds_phrase(hold)
    if hold.link_images:
        return f"{text} to {_molecules(hold.link_images)}"
    if len(hold.link_chains) > 1:
        return f"{text} between chains {listing(hold.link_chains)}"
    if hold.link_chains:
        return f"{text} between copies of chain {hold.link_chains[0]}"
    return text


def _kinds_phrase(hold: Hold) -> str:
    parts = [_counted(kind, count) for kind, count in hold.link_kinds]
    return listing(parts) or "none, it is apart already"


def _counted(kind: str, count: int) -> str:
    noun = NOUNS.get(kind, kind)
    if count == 1:
        return f"one {noun}"
    head, by, rest = noun.partition(" by ")
    return f"{number_in_words(count)} {head}s{by}{rest}"


def _molecules(images: Sequence[str]) -> str:
    """Return the neighbours that operators with shifts make, in words."""
    elsewhere = [_place(image) for image in images if image != IN_FILE]
    noun = "molecule" if len(elsewhere) == 1 else "molecules"
    parts = [f"the {noun} at {listing(elsewhere)}"] if elsewhere else []
    if IN_FILE in images:
        parts.insert(0, "a molecule of the asymmetric unit in no common assembly")
    return listing(parts)


def _place(image: str) -> str:
    """Return an operator as it is printed; whole cells only of a mere translation."""
    triplet, _, cells = image.removesuffix("]").partition(" [")
    if triplet == "x,y,z":
        shifts = [int(cell) for cell in cells.split()]
        steps = zip("xyz", shifts, strict=True)
        triplet = ",".join(f"{axis}{n:+d}" if n else axis for axis, n in steps)
    return triplet.replace(",", ", ").replace("-", "−")


def _closing(hold: Hold) -> str:
    if hold.closes == "ring":
        return f"closes to a ring of {number_in_words(hold.order)}"
    return f"goes on without end: a {hold.closes} {directions(hold.periods.tolist())}"


def _marginal(unit: MotionalUnit) -> str:
    chain, both, _ = unit.lattice.joining_distance_angstrom
    reach, what = both, "the assembly"
    if unit.lattice.verdict == "interface" or chain <= both:
        reach, what = chain, "its chain"
    return f"marginal: {what} would hold it from {reach:.1f}\u00a0Å"


def _changes(record: AnalysisRecord, unit: MotionalUnit) -> bool:
    words = {word for _, word in record.hold_of(unit).verdict_at}
    return words != {unit.lattice.verdict}


def _other_cutoffs(unit: MotionalUnit, hold: Hold) -> str:
    other: dict[str, list[str]] = {}
    for cutoff, word in hold.verdict_at:
        if word != unit.lattice.verdict:
            other.setdefault(word, []).append(f"{cutoff:g}")
    return "; ".join(f"{w} at {listing(c)}\u00a0Å" for w, c in other.items())


def _loose(record: AnalysisRecord, hold: Hold) -> str:
    structure = record.structure
    names = [
        f"{one_letter(str(structure.auth_comp_id[r]))}"
        f"{structure.auth_seq_id[r]}{structure.ins_code[r]}"
        for r in hold.loose_residues
    ]
    noun = "side chain" if len(names) == 1 else "side chains"
    return f"the poorly ordered {noun} of {listing(dict.fromkeys(names))}"


def hold_paragraphs(record: AnalysisRecord) -> tuple[str, ...]:
    """Return a paragraph on what holds each unit.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        For the first six units.
    """
    paragraphs = [_paragraph(record, unit) for unit in record.units[:UNITS_TOLD]]
    if len(record.units) > UNITS_TOLD:
        paragraphs.append("What holds the other units stands in run.json.")
    return tuple(paragraphs)


def _paragraph(record: AnalysisRecord, unit: MotionalUnit) -> str:
    hold = record.hold_of(unit)
    sentences = [_link_sentence(unit, hold)]
    if hold.closes != "finite":
        sentences[0] += f"; it {_closing(hold)}"
    if record.structure.crystal is not None:
        sentences.append(_ablation(unit, hold))
    sentences.append(_distances(record, unit))
    if hold.loose_residues:
        sentences.append(f"It rests on {_loose(record, hold)} ({_poor(record)})")
    if hold.firm_pieces:
        sentences.append(f"It {weak_phrase(unit, hold)}")
    return " ".join(f"{sentence}." for sentence in sentences)


def _poor(record: AnalysisRecord) -> str:
    if record.structure.is_predicted:
        return f"predicted with a confidence below {LOW_CONFIDENCE:g}"
    return "B factor above twice the median of the chain, or occupancy below one half"


def _link_sentence(unit: MotionalUnit, hold: Hold) -> str:
    if hold.weakest is None or not hold.link_kinds:
        return f"What holds {unit.name}: no contact"
    sizes = [number_in_words(len(side)) for side in hold.weakest.sides]
    single = hold.weakest.n_residue_contacts == 1
    fewest, verb = ("the contact", "is") if single else ("the fewest contacts", "are")
    return (
        f"What holds {unit.name}: {fewest} without which it falls into "
        f"{' and '.join(sizes)} residues {verb} {link_phrase(hold)}"
    )


def _ablation(unit: MotionalUnit, hold: Hold) -> str:
    count = len(unit.members)
    without, alone = hold.largest_without_lattice, hold.largest_by_lattice_alone
    if without == count and unit.lattice.verdict not in BY_LATTICE:
        return "Without lattice contacts all of it stays together"
    by_these = number_in_words(alone) if alone > 1 else "none"
    text = (
        f"Without lattice contacts {number_in_words(without)} of its "
        f"{number_in_words(count)} residues stay together, by these alone {by_these}"
    )
    if unit.lattice.verdict in BY_LATTICE and np.isfinite(hold.buried_area):
        text += f"; its residues bury {hold.buried_area:.0f}\u00a0Å² across the crystal"
    return text


def _distances(record: AnalysisRecord, unit: MotionalUnit) -> str:
    hold = record.hold_of(unit)
    names = ("its chain", "the assembly", "the lattice")
    parts, shortest = [], float("inf")
    for name, reach in zip(names, unit.lattice.joining_distance_angstrom, strict=True):
        if reach < shortest:
            parts.append(f"{name} from {reach:.1f}\u00a0Å")
            shortest = reach
    held = f"All of it is held by contacts of {', of '.join(parts)}" if parts else ""
    held = held or "Nothing within 16\u00a0Å holds all of it"
    tried = listing(f"{cutoff:g}" for cutoff, _ in hold.verdict_at)
    verdict = f"the verdict is {unit.lattice.verdict} at {tried}\u00a0Å as well"
    if _changes(record, unit):
        verdict = f"the verdict is another elsewhere: {_other_cutoffs(unit, hold)}"
    marginal = ", and marginal" if hold.is_marginal else ""
    return f"{held}; {verdict}{marginal}"


def loose_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return which units rest on a poorly ordered side chain.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        One sentence a unit.
    """
    holds = [record.hold_of(unit) for unit in record.units]
    return tuple(
        f"That {hold.unit} is connected rests on {_loose(record, hold)}."
        for hold in holds
        if hold.loose_residues
    )
