"""What a result rests on, the foot of the page, the end of a run."""

from structmap.result import AnalysisRecord
from structmap.version import __version__
from structmap.words.beside import choices_paragraph, second_opinion_sentence
from structmap.words.care import care_sentences
from structmap.words.direction import direction_sentence
from structmap.words.head import result_sentences, title
from structmap.words.holding import hold_paragraphs
from structmap.words.limits import border_sentences
from structmap.words.names import number_in_words
from structmap.words.packing import assembly_paragraph, network_paragraph


def rests_on(record: AnalysisRecord) -> tuple[str, ...]:
    """Return in a few paragraphs what the result rests on.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        Methods in plain words, with their settings.
    """
    return (
        f"{_contacts_paragraph(record)} {assembly_paragraph(record)}",
        f"{_units_paragraph(record)} {direction_sentence(record)}".rstrip(),
        _simple_way(record),
        *hold_paragraphs(record),
        *filter(None, (network_paragraph(record),)),
        *second_opinion_sentence(record),
        *choices_paragraph(record),
        *_limits_paragraph(record),
        *_process_paragraph(record),
    )


def _limits_paragraph(record: AnalysisRecord) -> tuple[str, ...]:
    sentences = border_sentences(record)
    return (f"What cannot be told: {' '.join(sentences)}",) if sentences else ()


def _process_paragraph(record: AnalysisRecord) -> tuple[str, ...]:
    processes = record.processes
    if not processes and not record.process_notes:
        return ()
    text = f"One process ({record.settings.model}): " if processes else ""
    if processes:
        text += (
            "one shared value against one for each residue, with both bootstraps of "
            "the errors. "
        )
    if any(process.descriptive for process in processes):
        text += (
            "The units were formed on the same profiles, so a value that is enough "
            "describes them and confirms nothing: residues picked for their likeness "
            "mostly pass. Form the units on another quantity (quantity and "
            "process_quantity), give the groups in the table, or compare with the "
            "groups that the same search finds on permuted sites (reference). "
        )
    return ((text + " ".join(record.process_notes)).rstrip(),)


def _contacts_paragraph(record: AnalysisRecord) -> str:
    structure, settings = record.structure, record.settings
    reach = (
        settings.ca_cutoff_angstrom if structure.ca_only else settings.cutoff_angstrom
    )
    atoms = "CA atoms" if structure.ca_only else "heavy atoms"
    text = f"Contacts: {atoms} within {reach:g}\u00a0Å"
    if structure.crystal is not None:
        group = structure.crystal.space_group
        text += f", over every symmetry mate and cell shift of {group}"
    if structure.n_models > 1:
        text += f", in at least half of the {structure.n_models} models"
    return text + "."


def _units_paragraph(record: AnalysisRecord) -> str:
    behaviour, measurements = record.behaviour, record.measurements
    parts = {
        "whole": "profiles as they are" if measurements.is_profile else "values",
        "shape": "shapes of the profiles, each less its own mean",
        "level": "levels of the profiles",
    }
    trend = "one baseline for the molecule"
    if behaviour.degree:
        share = 100 * behaviour.trend_share
        trend = (
            f"a smooth baseline of degree {behaviour.degree} over the molecule, "
            "which takes "
            f"{share:.0f}\u00a0% of the variance"
        )
    return (
        f"Likeness: {parts[measurements.part]}, weighted by their errors, against "
        f"{trend}. "
        "Units: residues that touch, differ from the baseline and behave alike "
        "within a "
        "fifth of the amplitude; they were grown along contacts and refined residue "
        "by residue."
    )


def _simple_way(record: AnalysisRecord) -> str:
    simple = record.behaviour.edge_filter_unit
    count = int(simple.max(initial=0))
    noun = "group" if count == 1 else "groups"
    mine = record.unit_of_site()[record.measurements.site] >= 0
    shared = int((mine & (simple > 0)).sum())
    return (
        "The plain way beside it (residues that move, joined where alike within "
        "errors) finds "
        f"{number_in_words(count)} {noun} with {int((simple > 0).sum())} residues, "
        f"{shared} of them also in a unit here; it differs where signals are weak, "
        "where a "
        "gradient runs over the molecule, or where units touch."
    )


def colophon(record: AnalysisRecord) -> str:
    """Return what kind of data this is, and that judgement stays with the reader.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        For the foot of the page.
    """
    note = (
        f"{record.settings.data_note.rstrip('.')}. "
        if record.settings.data_note
        else ""
    )
    return (
        f"{note}Made by structmap {__version__}. It helps judgement; no clinical or "
        "safety "
        "decision should rest on it alone."
    )


def summary_lines(record: AnalysisRecord, page: str) -> tuple[str, ...]:
    """Return the five lines that the terminal shows at the end.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    page : str
        Where the page was written.

    Returns
    -------
    tuple of str
        What was measured, what moves, the units, what to mind, where the page is.
    """
    sentences = result_sentences(record)
    care = care_sentences(record)
    lines = [title(record) + ".", sentences[0], " ".join(sentences[1:])]
    lines.append(f"Read with care: {care[0]}" if care else "")
    lines.append(f"The page: {page}")
    plain = (line.replace("\u00a0", " ").replace("\u202f", " ") for line in lines)
    return tuple(line for line in plain if line)
