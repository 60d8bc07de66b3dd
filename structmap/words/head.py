"""The title and the result, in at most three sentences."""

from structmap.result import AnalysisRecord, MotionalUnit
from structmap.words.names import (
    listing,
    measured_in_ligands,
    measured_residues,
    number_in_words,
    residues_in_view,
)
from structmap.words.phrases import hint_phrase, lattice_phrase, members_phrase

SUPPORTED = ("supported", "beyond-gradient")
UNITS_BY_NAME = 3


def title(record: AnalysisRecord) -> str:
    """Return what was measured, on which structure.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        The title of the settings, else one made from quantity and file.
    """
    if record.settings.title:
        return record.settings.title
    names = grouped_quantities(record)
    many = f"{number_in_words(len(names)).capitalize()} quantities"
    named = listing(names) if len(names) <= UNITS_BY_NAME else many
    kind = "profiles" if record.measurements.is_profile else "values"
    if named == many:
        return f"{many} on {_structure_phrase(record)}"
    return f"{named} {kind} on {_structure_phrase(record)}"


def grouped_quantities(record: AnalysisRecord) -> tuple[str, ...]:
    """Return the names of the quantities that enter the grouping.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        As in the table.
    """
    if record.settings.quantity:
        return record.settings.quantity
    with_errors = tuple(q.name for q in record.table.quantities if q.has_errors)
    return with_errors or (record.table.quantities[0].name,)


def _structure_phrase(record: AnalysisRecord) -> str:
    structure = record.structure
    name = structure.entry_id or structure.name
    if structure.crystal is not None:
        return f"the crystal structure {name}"
    if structure.n_models > 1:
        return f"the {structure.n_models} models of {name}"
    return f"the structure {name}"


def result_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return the result in at most three sentences.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        How many sites move; the units that are supported; the rest.
    """
    n_moving = int(record.behaviour.moves.sum())
    in_view, measured = residues_in_view(record), measured_residues(record)
    counted = f"Of {in_view} residues {measured}{_say_ligands(record)} were measured"
    if not n_moving and not record.units:
        return (
            f"{counted}.",
            record.reason
            or "No residue moves beyond its errors. Small motions, or motions at other "
            "rates, would not show in these data.",
        )
    verb = "moves" if n_moving == 1 else "move"
    first = f"{counted}, and {n_moving} of these {verb} beyond their errors."
    if not record.units:
        return (first, record.reason or _no_unit(record))
    return (first, *_unit_sentences(record))


def _say_ligands(record: AnalysisRecord) -> str:
    count = measured_in_ligands(record)
    if not count:
        return ""
    return (
        f" and {number_in_words(count)} {'site' if count == 1 else 'sites'} of ligands"
    )


def _no_unit(record: AnalysisRecord) -> str:
    n_moving = int(record.behaviour.moves.sum())
    subject = "That residue is" if n_moving == 1 else "No group of these is"
    if n_moving == 1:
        return f"{subject} alone: no neighbour behaves like it."
    return (
        f"{subject} both close and alike enough to be called a motional unit. This "
        "does "
        "not say that they move independently."
    )


def _unit_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    strong = [u for u in record.units if u.verdict in SUPPORTED]
    weak = [u for u in record.units if u.verdict not in SUPPORTED]
    sentences = []
    room = UNITS_BY_NAME
    if strong:
        shown = strong[:room]
        room -= len(shown)
        intro = _strong_intro(len(strong), record)
        sentences.append(
            f"{intro} " + "; ".join(_strong_phrase(record, u) for u in shown)
        )
        sentences[-1] += _and_more(len(strong) - len(shown))
    if weak:
        shown = weak[:room]
        phrases = [_weak_phrase(record, u) for u in shown]
        if phrases:
            sentences.append("; ".join(phrases) + _and_more(len(weak) - len(shown)))
        else:
            more = number_in_words(len(weak)).capitalize()
            noun = "group is a hint" if len(weak) == 1 else "groups are hints"
            sentences.append(f"{more} further {noun}, see d.")
    return tuple(sentences)


def _and_more(count: int) -> str:
    return f"; and {number_in_words(count)} more, see d." if count > 0 else "."


def _strong_intro(count: int, record: AnalysisRecord) -> str:
    noun, verb = ("group", "moves") if count == 1 else ("groups", "move")
    if record.behaviour.trend_share > 0.5 and record.behaviour.degree:
        words = number_in_words(count)
        return f"On a smooth trend over the molecule {words} {noun} {verb} alike:"
    return f"{number_in_words(count).capitalize()} {noun} {verb} alike:"


def _strong_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    return (
        f"{unit.name}, {members_phrase(record, unit)}, {lattice_phrase(record, unit)}"
    )


def _weak_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    head = f"{unit.name}, {members_phrase(record, unit)},"
    if unit.verdict == "graded":
        return (
            f"{head} grows step by step and is better read as a gradient than as a unit"
        )
    if unit.verdict == "tentative":
        return f"{head} {hint_phrase(unit)}"
    return f"{head} {lattice_phrase(record, unit)}; how sure it is was not tested"
