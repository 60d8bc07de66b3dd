"""What is said of one motional unit: how sure, what holds it, one sentence."""

import numpy as np

from structmap.one_process import OneProcess, show_interval
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.words.direction import direction_phrase
from structmap.words.holding import hold_lines, weak_phrase
from structmap.words.names import fitted_site_names
from structmap.words.phrases import (
    across_phrase,
    bridged_chains,
    lattice_phrase,
    members_phrase,
)


def unit_sure(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return how sure a unit is: the verdict, then its reasons.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    tuple of str
        The first is the verdict; ``not tested`` when there is none.
    """
    del record
    if not unit.verdict:
        return ("not tested",)
    lines = [unit.verdict]
    if not np.isnan(unit.p_place):
        lines.append(f"p\u00a0{p_text(unit.p_place)} against chance")
    if not np.isnan(unit.p_smooth):
        lines.append(f"p\u00a0{p_text(unit.p_smooth)} against a gradient")
    if not np.isnan(unit.stability):
        lines.append(f"{100 * unit.stability:.0f}\u00a0% of it back in repeats")
    return tuple(lines)


def p_text(p: float) -> str:
    """Return a p-value to two figures.

    Parameters
    ----------
    p : float
        From 0 to 1.

    Returns
    -------
    str
        ``0.0021`` or ``< 0.001``.
    """
    if p < 0.001:
        return "<\u00a00.001"
    return f"{p:.2g}" if p < 0.995 else "1.0"


def unit_holds(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return what holds a unit together, in lines.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    tuple of str
        The first says what, then operators, then what is left without neighbours.
    """
    verdict, count = unit.lattice.verdict, len(unit.members)
    if verdict in ("internal", "interface"):
        what = (
            "the molecule itself"
            if verdict == "internal"
            else _bridge_line(record, unit)
        )
        if record.structure.crystal is None:
            asked = "the crystal was not asked: there is none"
            return (what, asked, *hold_lines(record, unit))
        kept = len(unit.lattice.pieces_without_lattice[0])
        same = f"the same {count}" if kept == count else f"{kept} of its {count}"
        same = f"{same} without crystal neighbours"
        return (what, same, *hold_lines(record, unit))
    only = "only " if verdict == "lattice-only" else ""
    operators = dict.fromkeys(
        _operator_triplet(text) for text in unit.lattice.operators
    )
    left = _left_without(unit), *hold_lines(record, unit)
    return (only + across_phrase(record, unit), *operators, *left)


def _bridge_line(record: AnalysisRecord, unit: MotionalUnit) -> str:
    return f"the assembly: {bridged_chains(record, unit)}"


def _operator_triplet(text: str) -> str:
    return text.split(" [", maxsplit=1)[0]


def _left_without(unit: MotionalUnit) -> str:
    sizes = [len(piece) for piece in unit.lattice.pieces_without_lattice]
    listed = " + ".join(str(size) for size in sizes)
    if sizes[0] < 3:
        return f"nothing left without it: pieces of {listed}, too small to be a unit"
    return f"pieces of {listed} without it"


def unit_process(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return whether one process explains a unit.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    tuple of str
        The verdict, the value with its interval, the chance; ``not tested`` when no
        model was named.
    """
    process = record.process_of(unit)
    if process is None:
        return ("not tested",)
    lines = [_process_word(record, process)]
    if process.verdict != "distinct" and process.fit is not None:
        lines.append(show_interval(process))
    if process.verdict != "undetermined":
        lines.append(f"p\u00a0{p_text(process.p_distinct)}")
    if process.descriptive:
        lines.append("describes only: the unit was formed on these profiles")
    return tuple(lines)


def _process_word(record: AnalysisRecord, process: OneProcess) -> str:
    if process.verdict == "shared":
        return "one value is enough"
    if process.verdict == "shared by a subset":
        apart = fitted_site_names(record, process.apart)
        return f"one value is enough without {apart}"
    if process.verdict == "distinct":
        return "several values are needed"
    return "these data cannot tell"


def unit_sentence(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return one sentence on a unit that a collaborator can read.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        Members, what holds them together, how sure.
    """
    head = (
        f"{unit.name}, {members_phrase(record, unit)}, {lattice_phrase(record, unit)}"
    )
    weak = weak_phrase(unit, record.hold_of(unit))
    head += f"; it {weak}" if weak else ""
    way = direction_phrase(record, unit)
    head += f"; {way}" if way else ""
    return f"{head}; {_sure_phrase(unit)}{_process_clause(record, unit)}."


def _process_clause(record: AnalysisRecord, unit: MotionalUnit) -> str:
    process = record.process_of(unit)
    if process is None:
        return ""
    text = f"; {_process_word(record, process)}"
    if process.verdict in ("shared", "shared by a subset"):
        text += f", {show_interval(process)}"
    return text


def _sure_phrase(unit: MotionalUnit) -> str:
    if not unit.verdict:
        return "how sure this is was not tested"
    chance = f"p {p_text(unit.p_place)} against chance placement".replace("\u00a0", " ")
    said = {
        "supported": f"supported by the data ({chance})",
        "beyond-gradient": "supported, and more sharply bounded than a gradient is "
        f"({chance})",
        "graded": f"better read as a gradient than as a unit ({chance})",
        "tentative": "a hint that these data do not show beyond doubt, nor exclude",
    }
    return said[unit.verdict]
