"""What the data cannot tell because residues were not measured."""

import numpy as np
from numpy.typing import NDArray

from structmap.result import AnalysisRecord, MotionalUnit
from structmap.structure import one_letter
from structmap.words.names import (
    listing,
    measured_chains,
    measured_residues,
    number_in_words,
    residues_in_view,
)

NAMED_AT_MOST = 5
# Below these shares the map is called patchy, the border of a unit uncertain.
ENOUGH_MEASURED, ENOUGH_AROUND = 0.5, 2 / 3


def coverage_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what cannot be told because few residues were measured, or apart.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        One sentence each; empty where most residues were measured and all touch.
    """
    found = (_say_few_measured(record), _say_alone(record))
    return tuple(sentence for sentence in found if sentence)


def border_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return where units touch residues that were not measured.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        A sentence or two for each unit that does, then the units between which only an
        unmeasured residue lies.
    """
    gaps = find_gaps(record)
    found = [_say_border(record, unit, gaps) for unit in record.units]
    found += _say_between(record, gaps)
    return tuple(sentence for sentence in found if sentence)


def find_gaps(record: AnalysisRecord) -> dict[int, tuple[int, ...]]:
    """Return the residues that touch each measured site and were not measured.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    dict of int to tuple of int
        Rising indices of residues under the index of the site; sites without are left
        out. Contacts are those of the first copy of a site, in all images.
    """
    site_of_residue = np.full(len(record.structure.auth_seq_id), -1)
    compared = record.measurements.site
    measured = _is_measured(record)
    site_of_residue[record.sites.residue[compared]] = compared
    contacts, original = record.contacts, record.structure.original_residue
    first = np.concatenate([contacts.residue_1, contacts.residue_2])
    second = np.concatenate([contacts.residue_2, contacts.residue_1])
    keep = (site_of_residue[first] >= 0) & ~measured[second]
    gaps: dict[int, set[int]] = {}
    pairs = zip(
        site_of_residue[first[keep]].tolist(),
        original[second[keep]].tolist(),
        strict=True,
    )
    for site, residue in pairs:
        gaps.setdefault(site, set()).add(residue)
    return {site: tuple(sorted(gaps[site])) for site in sorted(gaps)}


def _is_measured(record: AnalysisRecord) -> NDArray[np.bool_]:
    """Tell which residues are a copy of a site whose values are compared."""
    sites = record.sites
    measured = np.zeros(len(record.structure.auth_seq_id), bool)
    compared = np.isin(sites.copy_site, record.measurements.site)
    measured[sites.copy_residue[compared]] = True
    return measured


def gap_note(record: AnalysisRecord, residues: tuple[int, ...]) -> str:
    """Return a few words on the unmeasured residues that a site touches.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    residues : tuple of int
        Indices of residues.

    Returns
    -------
    str
        ``touches P30 G31, not measured``.
    """
    return f"touches {_names(record, residues)}, not measured"


def _names(record: AnalysisRecord, residues: tuple[int, ...]) -> str:
    structure, several = record.structure, len(measured_chains(record)) > 1
    names = []
    for residue in residues[:NAMED_AT_MOST]:
        letter = one_letter(str(structure.auth_comp_id[residue]))
        name = f"{letter}{structure.auth_seq_id[residue]}{structure.ins_code[residue]}"
        own = several or structure.auth_asym_id[residue] not in measured_chains(record)
        names.append(f"{structure.auth_asym_id[residue]}\u00a0{name}" if own else name)
    more = len(residues) - NAMED_AT_MOST
    return " ".join(names) + (f" and {number_in_words(more)} more" if more > 0 else "")


def _say_few_measured(record: AnalysisRecord) -> str:
    in_view, measured = residues_in_view(record), measured_residues(record)
    if not in_view or measured >= ENOUGH_MEASURED * in_view:
        return ""
    return (
        f"Only {measured} of {in_view} residues were measured; units are joined over "
        "contacts of measured residues, so one with gaps inside falls into pieces, and "
        "what lies between cannot be told."
    )


def _say_alone(record: AnalysisRecord) -> str:
    compared = record.measurements.site
    joined = np.isin(record.graph.site_1, compared)
    joined &= np.isin(record.graph.site_2, compared)
    touched = np.concatenate([record.graph.site_1[joined], record.graph.site_2[joined]])
    alone = int((~np.isin(compared, touched)).sum())
    if not alone or alone == len(compared):
        return ""
    noun, verb, be = (
        ("residue", "touches", "it") if alone == 1 else ("residues", "touch", "they")
    )
    return (
        f"{number_in_words(alone).capitalize()} measured {noun} {verb} no other "
        f"measured residue; whether {be} belong{'s' * (alone == 1)} to a unit cannot "
        "be told."
    )


def _say_border(
    record: AnalysisRecord, unit: MotionalUnit, gaps: dict[int, tuple[int, ...]]
) -> str:
    """Say where a unit touches unmeasured residues, and whether they are many."""
    holes = _holes(unit, gaps)
    if not holes:
        return ""
    noun = "a residue that was" if len(holes) == 1 else "residues that were"
    if len(holes) > 1:
        noun = f"{number_in_words(len(holes))} {noun}"
    text = (
        f"{unit.name} touches {noun} not measured ({_names(record, holes)}); whether "
        "it goes on there cannot be told."
    )
    around = _measured_around(record, unit)
    if around < ENOUGH_AROUND * (around + len(holes)):
        text += (
            f" Of the {around + len(holes)} residues around it {around} were measured, "
            "so its size and its border are uncertain."
        )
    return text


def _holes(unit: MotionalUnit, gaps: dict[int, tuple[int, ...]]) -> tuple[int, ...]:
    return tuple(sorted({r for s in unit.members.tolist() for r in gaps.get(s, ())}))


def _measured_around(record: AnalysisRecord, unit: MotionalUnit) -> int:
    """Count the measured sites that touch a unit and are not in it."""
    graph = record.graph
    inside_1 = np.isin(graph.site_1, unit.members)
    inside_2 = np.isin(graph.site_2, unit.members)
    near = np.concatenate(
        [graph.site_2[inside_1 & ~inside_2], graph.site_1[inside_2 & ~inside_1]]
    )
    return len(np.intersect1d(near, record.measurements.site))


def _say_between(record: AnalysisRecord, gaps: dict[int, tuple[int, ...]]) -> list[str]:
    """Say which units are parted by no more than an unmeasured residue."""
    holes = {unit.name: set(_holes(unit, gaps)) for unit in record.units}
    names = list(holes)
    graph, unit_of = record.graph, record.unit_of_site()
    joined = {
        frozenset((int(a), int(b)))
        for a, b in zip(unit_of[graph.site_1], unit_of[graph.site_2], strict=True)
    }
    sentences = []
    for i, one in enumerate(names):
        for j, other in enumerate(names[:i]):
            between = tuple(sorted(holes[one] & holes[other]))
            if between and frozenset((i, j)) not in joined:
                sentences.append(
                    f"{listing((other, one))} both touch {_names(record, between)}, "
                    "not measured; whether they are one unit cannot be told."
                )
    return sentences
