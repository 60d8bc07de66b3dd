"""The sentences that tables, page and terminal share.

Unit names stand in the sentences as ``U1``, ``U2``, …, so that the page can turn them
into buttons. Nothing here says "significant" or "rigid", and nothing names a cause that
was not tested.
"""

from collections.abc import Iterable

import numpy as np

from structmap.lattice import element_text, number_crystal_contacts
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.structure import POLYMER, one_letter
from structmap.version import __version__

_NUMBERS = (
    "no one two three four five six seven eight nine ten eleven twelve".split()  # noqa: SIM905
)
SUPPORTED = ("supported", "beyond-gradient")
SCALE_LOW, SCALE_HIGH = 0.5, 2.0
NAMED_AT_MOST = 5
UNITS_BY_NAME = 3


def number_in_words(number: int) -> str:
    """Return a number up to twelve as a word, a larger one in figures.

    Parameters
    ----------
    number : int
        From 0.

    Returns
    -------
    str
        ``three`` for 3, ``18 800`` for 18800, with thin no-break spaces.
    """
    if number < len(_NUMBERS):
        return _NUMBERS[number]
    return f"{number:,}".replace(",", "\u202f") if number > 9999 else str(number)


def site_name(record: AnalysisRecord, site: int) -> str:
    """Return the short name of a site for prose, ``D56A``.

    Parameters
    ----------
    record : AnalysisRecord
    site : int
        Index of a site.

    Returns
    -------
    str
        One letter, number and insertion code; the chain in front when sites of several
        chains were measured, the atom behind when one is named.
    """
    structure, residue = record.structure, int(record.sites.residue[site])
    if residue < 0:
        return str(record.sites.name[site])
    letter = one_letter(str(structure.auth_comp_id[residue]))
    text = f"{letter}{structure.auth_seq_id[residue]}{structure.ins_code[residue]}"
    if len(measured_chains(record)) > 1:
        text = f"{structure.auth_asym_id[residue]}\u00a0{text}"
    atom = record.sites.atom[site]
    return f"{text}\u00a0{atom}" if atom and _atoms_differ(record) else text


def _atoms_differ(record: AnalysisRecord) -> bool:
    residues = record.sites.residue[record.sites.residue >= 0]
    return len(np.unique(residues)) < len(residues)


def measured_chains(record: AnalysisRecord) -> tuple[str, ...]:
    """Return the chains that hold the first copies of measured sites.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    tuple of str
        Author names, in the order of the coordinates.
    """
    residues = record.sites.residue[record.sites.residue >= 0]
    names = record.structure.auth_asym_id[np.sort(residues)].tolist()
    return tuple(dict.fromkeys(names))


def _listing(parts: Iterable[str], last: str = "and") -> str:
    parts = list(parts)
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} {last} {parts[-1]}"


# --- the head of the page -------------------------------------------------------------


def title(record: AnalysisRecord) -> str:
    """Return what was measured, on which structure.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    str
        The title of the settings, else one made from quantity and file.
    """
    if record.settings.title:
        return record.settings.title
    names = _listing(grouped_quantities(record))
    kind = "profiles" if record.measurements.is_profile else "values"
    return f"{names} {kind} on {_structure_phrase(record)}"


def grouped_quantities(record: AnalysisRecord) -> tuple[str, ...]:
    """Return the names of the quantities that enter the grouping.

    Parameters
    ----------
    record : AnalysisRecord

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

    Returns
    -------
    tuple of str
        How many sites move; the units that are supported; the rest.
    """
    n_moving = int(record.behaviour.moves.sum())
    counted = f"Of {_residues_in_view(record)} residues {_n_measured(record)} were measured"
    if not n_moving and not record.units:
        return (
            f"{counted}.",
            "No residue moves beyond its errors. Small motions, or motions at other "
            "rates, would not show in these data.",
        )
    verb = "moves" if n_moving == 1 else "move"
    first = f"{counted}, and {n_moving} of these {verb} beyond their errors."
    if not record.units:
        return (first, _no_unit(record))
    return (first, *_unit_sentences(record))


def _no_unit(record: AnalysisRecord) -> str:
    n_moving = int(record.behaviour.moves.sum())
    subject = "That residue is" if n_moving == 1 else "No group of these is"
    if n_moving == 1:
        return f"{subject} alone: no neighbour behaves like it."
    return (
        f"{subject} both close and alike enough to be called a motional unit. This does "
        "not say that they move independently."
    )


def _residues_in_view(record: AnalysisRecord) -> int:
    """Count the polymer residues of the chains that were measured, each site once."""
    structure = record.structure
    in_view = np.isin(structure.auth_asym_id, measured_chains(record))
    in_view &= structure.kind_of_residue == POLYMER
    in_view &= structure.original_residue == np.arange(len(in_view))
    return int(in_view.sum())


def _n_measured(record: AnalysisRecord) -> int:
    sites = record.sites.residue[record.measurements.site]
    return len(np.unique(sites[sites >= 0]))


def _unit_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    strong = [u for u in record.units if u.verdict in SUPPORTED]
    weak = [u for u in record.units if u.verdict not in SUPPORTED]
    sentences = []
    room = UNITS_BY_NAME
    if strong:
        shown = strong[:room]
        room -= len(shown)
        intro = _strong_intro(len(strong), record)
        sentences.append(f"{intro} " + "; ".join(_strong_phrase(record, u) for u in shown))
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
        return f"On a smooth trend over the molecule {number_in_words(count)} {noun} {verb} alike:"
    return f"{number_in_words(count).capitalize()} {noun} {verb} alike:"


def _strong_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    return f"{unit.name}, {members_phrase(record, unit)}, {lattice_phrase(record, unit)}"


def _weak_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    head = f"{unit.name}, {members_phrase(record, unit)},"
    if unit.verdict == "graded":
        return f"{head} grows step by step and is better read as a gradient than as a unit"
    if unit.verdict == "tentative":
        return f"{head} is a hint: it {came_back(unit)}"
    return f"{head} {lattice_phrase(record, unit)}; how sure it is was not tested"


def came_back(unit: MotionalUnit) -> str:
    """Return how well a unit came back when its errors were drawn again.

    Parameters
    ----------
    unit : MotionalUnit

    Returns
    -------
    str
        A phrase that follows "it".
    """
    if np.isnan(unit.stability):
        return "was not tried again with other errors"
    return f"overlaps by {100 * unit.stability:.0f}\u00a0% with what repeats with other errors find"


def members_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return the members of a unit: all when few, else their number and a centre.

    Parameters
    ----------
    record : AnalysisRecord
    unit : MotionalUnit

    Returns
    -------
    str
        ``S28 N31 with Y51 E53 of a neighbour`` or ``seven residues around L23``.
    """
    pieces = unit.lattice.pieces_without_lattice
    if len(unit.members) <= NAMED_AT_MOST:
        groups = [" ".join(site_name(record, s) for s in piece) for piece in pieces]
        return " with ".join(groups[:2]) + (" of a neighbour" if len(pieces) > 1 else "")
    return (
        f"{number_in_words(len(unit.members))} residues around "
        f"{site_name(record, _centre(record, unit))}"
    )


def _centre(record: AnalysisRecord, unit: MotionalUnit) -> int:
    """Return the member with the largest membership times deviation."""
    row = np.searchsorted(record.measurements.site, unit.members)
    weight = np.nan_to_num(record.membership_probability[unit.members], nan=1.0)
    return int(unit.members[np.argmax(weight * np.abs(record.behaviour.deviation[row]))])


def lattice_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return in words what holds a unit together.

    Parameters
    ----------
    record : AnalysisRecord
    unit : MotionalUnit

    Returns
    -------
    str
        A phrase that follows the name of the unit.
    """
    verdict = unit.lattice.verdict
    if verdict == "internal":
        return "lies inside the molecule"
    if verdict == "interface":
        return f"bridges {_bridged(record, unit)} of the assembly"
    where = _across(record, unit)
    if verdict == "lattice-joined":
        kept = len(unit.lattice.pieces_without_lattice[0])
        stay = "stay" if kept > 1 else "stays"
        return (
            f"is held together by {where}; {number_in_words(kept)} of its "
            f"{number_in_words(len(unit.members))} residues {stay} together without it"
        )
    return (
        f"exists only across {where}, and no unit is left of it when the neighbours are taken away"
    )


def _bridged(record: AnalysisRecord, unit: MotionalUnit) -> str:
    copies = np.isin(record.sites.copy_site, unit.members)
    names = record.structure.auth_asym_id[record.sites.copy_residue[copies]].tolist()
    chains = sorted(set(names))
    if len(chains) == 1:
        return f"chain {chains[0]} and its mates"
    return f"chains {_listing(chains)}"


def _across(record: AnalysisRecord, unit: MotionalUnit) -> str:
    numerals = joining_numerals(record, unit)
    noun = "crystal contact" if len(numerals) == 1 else "crystal contacts"
    return f"{noun} {_listing(numerals)}"


def joining_numerals(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return the numerals of the crystal contacts that join a unit.

    Parameters
    ----------
    record : AnalysisRecord
    unit : MotionalUnit

    Returns
    -------
    tuple of str
        Roman numerals in rising order; empty when none is needed.
    """
    numbered = number_crystal_contacts(record.structure, record.contacts)
    places = sorted({int(numbered.of_contact[index]) for index in unit.lattice.contacts})
    return tuple(numbered.crystal_contacts[place].numeral for place in places if place >= 0)


# --- what to read with care -----------------------------------------------------------


def care_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what the reader must know, the most important first.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    tuple of str
        One sentence each; the page shows the first three in its head.
    """
    found = [
        *_care_errors(record),
        *record.sites.notes,
        *_care_scale(record),
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
    return [
        f"The values came without errors; one common error of {error:.3g} "
        f"{record.behaviour.summary_unit} was estimated from their scatter".rstrip()
        + ", and every statement below rests on it."
    ]


def _care_scale(record: AnalysisRecord) -> list[str]:
    scale = record.behaviour.error_scale
    if not record.measurements.errors_given or SCALE_LOW <= scale <= SCALE_HIGH:
        return []
    if scale < SCALE_LOW:
        return [
            f"The stated errors are larger than the scatter (scale {scale:.2f}); they were "
            "scaled to it, check how they were made."
        ]
    cause = "the errors are too small or the sites have baselines of their own"
    remedy = (
        "" if record.measurements.part != "whole" else "; compare shape and level apart to tell"
    )
    if not record.measurements.is_profile:
        remedy = "; check how the errors were made"
    return [
        f"The values scatter {scale:.1f} times as much as their errors, which were scaled "
        f"up: {cause}{remedy}."
    ]


def _care_crystal(record: AnalysisRecord) -> list[str]:
    structure = record.structure
    if structure.crystal is None:
        return [
            f"There is no crystal to ask about, because {structure.no_crystal_reason}; contacts "
            "are those inside the molecule or assembly."
        ]
    return [
        f"A statement about the crystal holds for {structure.name}; whether the measured "
        "sample packs in the same way cannot be told from these data."
    ]


def _care_points(record: AnalysisRecord) -> list[str]:
    reasons = [reason for reason in record.measurements.point_reason if reason]
    if not reasons:
        return []
    total = len(record.measurements.point_reason)
    verb = "is" if len(reasons) == 1 else "are"
    return [
        f"{number_in_words(len(reasons)).capitalize()} of {number_in_words(total)} points a "
        f"profile {verb} left out: {_listing(dict.fromkeys(reasons))}."
    ]


def _care_unmeasured(record: AnalysisRecord) -> list[str]:
    missing = _residues_in_view(record) - _n_measured(record)
    if missing <= 0:
        return []
    noun, verb, state = (
        ("residue", "was", "is") if missing == 1 else ("residues", "were", "are")
    )
    count = number_in_words(missing).capitalize()
    return [f"{count} {noun} {verb} not measured and {state} not taken for rigid."]


def facts(record: AnalysisRecord) -> tuple[tuple[str, tuple[str, ...]], ...]:
    """Return the facts beside the title: label and lines.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    tuple of (str, tuple of str)
        Coordinates, Values, Numbering, Errors.
    """
    return (
        ("Coordinates", _coordinate_lines(record)),
        ("Values", _value_lines(record)),
        ("Numbering", _numbering_lines(record)),
        ("Errors", (_errors_line(record),)),
    )


def _coordinate_lines(record: AnalysisRecord) -> tuple[str, ...]:
    structure = record.structure
    chains = measured_chains(record)
    noun = "chain" if len(chains) == 1 else "chains"
    first = f"{structure.name}, {noun} {' '.join(chains)}"
    if not np.isnan(structure.resolution_angstrom):
        first += f", {structure.resolution_angstrom:.2f}\u00a0Å"
    if structure.crystal is None:
        models = structure.n_models
        return (first, "no crystal" + (f", {models} models" if models > 1 else ""))
    return (first, f"{structure.crystal.space_group}, {_neighbours(record)}")


def _neighbours(record: AnalysisRecord) -> str:
    numbered = number_crystal_contacts(record.structure, record.contacts)
    count = len(numbered.crystal_contacts)
    noun = "crystal contact" if count == 1 else "crystal contacts"
    return f"{number_in_words(count)} {noun}"


def _value_lines(record: AnalysisRecord) -> tuple[str, ...]:
    names = ", ".join(record.table.names)
    if not record.measurements.is_profile:
        return (names, ", ".join(grouped_quantities(record)))
    quantity = next(q for q in record.table.quantities if q.name in grouped_quantities(record))
    spread = f"{quantity.x[0]:g}–{quantity.x[-1]:g} {quantity.x_unit}".rstrip()
    if record.settings.mas_rate_hertz:
        spread += f", spinning at {record.settings.mas_rate_hertz / 1000:g}\u00a0kHz"
    return (f"{names}, {len(quantity.x)} points", spread)


def _numbering_lines(record: AnalysisRecord) -> tuple[str, ...]:
    lines = []
    for chain in record.sites.chains:
        text = f"{chain.auth_asym_id}: offset {chain.offset:d}".replace("-", "−")
        if chain.n_named:
            text += f", {chain.n_agreeing} of {chain.n_named} names agree"
        else:
            text += f", {chain.n_matched} matched"
        lines.append(text)
    if len(lines) > 2:
        lines = [lines[0], f"and {number_in_words(len(lines) - 1)} more chains"]
    return tuple(lines)


def _errors_line(record: AnalysisRecord) -> str:
    if record.measurements.errors_given:
        return f"given with the values, scale {record.behaviour.error_scale:.2f}"
    return "not given, estimated from the scatter"


# --- one unit -------------------------------------------------------------------------


def unit_sure(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return how sure a unit is: the verdict, then its reasons.

    Parameters
    ----------
    record : AnalysisRecord
    unit : MotionalUnit

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
        lines.append(f"{100 * unit.stability:.0f}\u00a0% overlap in repeats")
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
    unit : MotionalUnit

    Returns
    -------
    tuple of str
        The first says what, then operators, then what is left without neighbours.
    """
    verdict, count = unit.lattice.verdict, len(unit.members)
    if verdict in ("internal", "interface"):
        what = "the molecule itself" if verdict == "internal" else _bridge_line(record, unit)
        if record.structure.crystal is None:
            return (what, "the crystal was not asked: there is none")
        kept = len(unit.lattice.pieces_without_lattice[0])
        same = f"the same {count}" if kept == count else f"{kept} of its {count}"
        return (what, f"{same} without crystal neighbours")
    only = "only " if verdict == "lattice-only" else ""
    operators = dict.fromkeys(_operator_triplet(text) for text in unit.lattice.operators)
    return (only + _across(record, unit), *operators, _left_without(unit))


def _bridge_line(record: AnalysisRecord, unit: MotionalUnit) -> str:
    return f"the assembly: {_bridged(record, unit)}"


def _operator_triplet(text: str) -> str:
    return text.split(" [")[0]


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
    unit : MotionalUnit

    Returns
    -------
    tuple of str
        ``not tested`` when no model was fitted.
    """
    del record, unit
    return ("not tested",)


def unit_sentence(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return one sentence on a unit that a collaborator can read.

    Parameters
    ----------
    record : AnalysisRecord
    unit : MotionalUnit

    Returns
    -------
    str
        Members, what holds them together, how sure.
    """
    head = f"{unit.name}, {members_phrase(record, unit)}, {lattice_phrase(record, unit)}"
    return f"{head}; {_sure_phrase(unit)}."


def _sure_phrase(unit: MotionalUnit) -> str:
    if not unit.verdict:
        return "how sure this is was not tested"
    chance = f"p {p_text(unit.p_place)} against chance placement".replace("\u00a0", " ")
    said = {
        "supported": f"supported by the data ({chance})",
        "beyond-gradient": f"supported, and more sharply bounded than a gradient ({chance})",
        "graded": f"better read as a gradient than as a unit ({chance})",
        "tentative": "a hint that these data do not show beyond doubt, nor exclude",
    }
    return said[unit.verdict]


# --- notes ----------------------------------------------------------------------------


def rests_on(record: AnalysisRecord) -> tuple[str, ...]:
    """Return in two or three paragraphs what the result rests on.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    tuple of str
        Methods in plain words, with their settings.
    """
    return (_contacts_paragraph(record), _units_paragraph(record), _simple_way(record))


def _contacts_paragraph(record: AnalysisRecord) -> str:
    structure, settings = record.structure, record.settings
    reach = settings.ca_cutoff_angstrom if structure.ca_only else settings.cutoff_angstrom
    atoms = "CA atoms" if structure.ca_only else "heavy atoms"
    text = f"Contacts: {atoms} within {reach:g}\u00a0Å"
    if structure.crystal is not None:
        text += f", over every symmetry mate and cell shift of {structure.crystal.space_group}"
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
            f"a smooth baseline of degree {behaviour.degree} over the molecule, which takes "
            f"{share:.0f}\u00a0% of the variance"
        )
    return (
        f"Likeness: {parts[measurements.part]}, weighted by their errors, against {trend}. "
        "Units: residues that touch, differ from the baseline and behave alike within a "
        "fifth of the amplitude; they were grown along contacts and refined residue by residue."
    )


def _simple_way(record: AnalysisRecord) -> str:
    simple = record.behaviour.edge_filter_unit
    count = int(simple.max(initial=0))
    noun = "group" if count == 1 else "groups"
    mine = record.unit_of_site()[record.measurements.site] >= 0
    shared = int((mine & (simple > 0)).sum())
    return (
        f"The plain way beside it (residues that move, joined where alike within errors) finds "
        f"{number_in_words(count)} {noun} with {int((simple > 0).sum())} residues, "
        f"{shared} of them also in a unit here; it differs where signals are weak, where a "
        "gradient runs over the molecule, or where units touch."
    )


def contact_label(record: AnalysisRecord, operator: int, shift: Iterable[int]) -> str:
    """Return an operator with its shift as plain text.

    Parameters
    ----------
    record : AnalysisRecord
    operator : int
        Index of an operator of the crystal.
    shift : iterable of int
        Whole cells.

    Returns
    -------
    str
        ``-x,y+1/2,-z+1/2 [1 0 0]``; blank without a crystal.
    """
    crystal = record.structure.crystal
    return "" if crystal is None else element_text(crystal, (operator, *shift))


def colophon(record: AnalysisRecord) -> str:
    """Return what kind of data this is and the caution that judgement stays with the reader.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    str
        For the foot of the page.
    """
    note = f"{record.settings.data_note.rstrip('.')}. " if record.settings.data_note else ""
    return (
        f"{note}Made by structmap {__version__}. It helps judgement; no clinical or safety "
        "decision should rest on it alone."
    )


def summary_lines(record: AnalysisRecord, page: str) -> tuple[str, ...]:
    """Return the five lines that the terminal shows at the end.

    Parameters
    ----------
    record : AnalysisRecord
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
