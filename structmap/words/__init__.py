"""The sentences that tables, page and terminal share.

Unit names stand in the sentences as ``U1``, ``U2``, …, so that the page can turn them
into buttons. Nothing here says "significant" or "rigid", and nothing names a cause that
was not tested.
"""

from structmap.words.care import care_sentences
from structmap.words.direction import (
    direction_phrase,
    direction_sentence,
    low_quantities,
)
from structmap.words.facts import facts
from structmap.words.head import grouped_quantities, result_sentences, title
from structmap.words.holding import closing_line
from structmap.words.limits import find_gaps, gap_note
from structmap.words.misfit import misfit_caption, misfit_figures, shown_fit
from structmap.words.names import (
    errors_off_baseline,
    fitted_site_names,
    measured_chains,
    number_in_words,
    site_name,
)
from structmap.words.notes import colophon, rests_on, summary_lines
from structmap.words.packing import confidence_note
from structmap.words.phrases import joining_numerals, lattice_phrase, members_phrase
from structmap.words.units import (
    p_text,
    unit_holds,
    unit_process,
    unit_sentence,
    unit_sure,
)

__all__ = [
    "care_sentences",
    "closing_line",
    "colophon",
    "confidence_note",
    "direction_phrase",
    "direction_sentence",
    "errors_off_baseline",
    "facts",
    "find_gaps",
    "fitted_site_names",
    "gap_note",
    "grouped_quantities",
    "joining_numerals",
    "lattice_phrase",
    "low_quantities",
    "measured_chains",
    "members_phrase",
    "misfit_caption",
    "misfit_figures",
    "number_in_words",
    "p_text",
    "rests_on",
    "result_sentences",
    "shown_fit",
    "site_name",
    "summary_lines",
    "title",
    "unit_holds",
    "unit_process",
    "unit_sentence",
    "unit_sure",
]
