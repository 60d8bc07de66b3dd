"""What was looked at beside the units: the other part, other choices, other methods."""

import numpy as np

from structmap.motional_units.beside import Beside
from structmap.motional_units.choices import Alternative
from structmap.motional_units.other_part import OtherPart
from structmap.result import AnalysisRecord
from structmap.words.names import number_in_words, site_name

NAMED_AT_MOST = 12
MOST_GROUPS = 3
# Models of profiles whose level also holds motions that the profile cannot show.
DISPERSION_MODELS = ("mas-r1rho", "exchange-r1rho", "cpmg")


def other_part_sentences(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what the part of the profiles shows that was not grouped.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        A sentence for each group that only this part shows, then the single residues;
        empty without such a part.
    """
    other = record.beside.other_part
    if other is None:
        return ()
    said = [
        _say_group(record, other, place)
        for place in range(min(len(other.groups), MOST_GROUPS))
    ]
    more = len(other.groups) - MOST_GROUPS
    if more > 0:
        groups = "group is" if more == 1 else "groups are"
        said.append(f"{number_in_words(more).capitalize()} more such {groups} there.")
    if len(other.single):
        said.append(_say_single(record, other))
    if not said:
        what = "levels" if other.part == "level" else "shapes"
        said.append(
            f"The {what} of the profiles, looked at as well, show no further group."
        )
    return tuple(said)


def _say_group(record: AnalysisRecord, other: OtherPart, place: int) -> str:
    members = other.groups[place]
    names = _names(record, members.tolist())
    head = f"{number_in_words(len(members)).capitalize()} residues ({names})"
    if other.part == "shape":
        return (
            f"{head} have profiles of another shape at a level like that of the "
            "others; no test of chance was made of this."
        )
    return _say_level(record, head, raised=other.raised[place])


def _say_level(record: AnalysisRecord, head: str, *, raised: bool) -> str:
    way = "raised" if raised else "lowered"
    if record.settings.model not in DISPERSION_MODELS:
        return (
            f"{head} have a {way} level of profiles whose shape is like that of the "
            "others; no test of chance was made of this."
        )
    if not raised:
        return (
            f"{head} have a lowered level without dispersion; no test of chance was "
            "made of this."
        )
    return (
        f"{head} have a raised level without dispersion: motion outside the window of "
        "this experiment, which is not rest; no test of chance was made of this."
    )


def _say_single(record: AnalysisRecord, other: OtherPart) -> str:
    names = _names(record, other.single.tolist())
    what = "level" if other.part == "level" else "shape"
    noun, verb, their = (
        ("residue", "stands", "its")
        if len(other.single) == 1
        else ("residues", "stand", "their")
    )
    return (
        f"{number_in_words(len(other.single)).capitalize()} single {noun} ({names}) "
        f"{verb} apart by the {what} of {their} profile alone."
    )


def _names(record: AnalysisRecord, sites: list[int]) -> str:
    names = " ".join(site_name(record, site) for site in sites[:NAMED_AT_MOST])
    return names + " …" * (len(sites) > NAMED_AT_MOST)


def choices_paragraph(record: AnalysisRecord) -> tuple[str, ...]:
    """Return how the units change when choices are made otherwise.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        One paragraph; empty when nothing was tried.
    """
    beside: Beside = record.beside
    if not beside.choices:
        return ()
    units = record.unit_of_site()
    here = _say_count(len(record.units), int((units >= 0).sum()))
    tried = "; ".join(_say_alternative(one) for one in beside.choices)
    return (
        f"Choices: here {here}. One search each with another choice gives {tried}. "
        "In brackets the adjusted Rand index against the units here: 1 is the same "
        "grouping, 0 no more agreement than by chance.",
    )


def _say_alternative(one: Alternative) -> str:
    counted = _say_count(one.n_units, one.n_sites)
    return f"{one.choice}: {counted} ({one.agreement:.2f})"


def _say_count(n_units: int, n_sites: int) -> str:
    if not n_units:
        return "no unit"
    noun = "unit" if n_units == 1 else "units"
    return f"{number_in_words(n_units)} {noun} with {n_sites} residues"


def second_opinion_sentence(record: AnalysisRecord) -> tuple[str, ...]:
    """Return what general clustering makes of the same data.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        One paragraph; empty unless a second opinion was asked for.
    """
    opinion = record.beside.second_opinion
    if opinion is None:
        return ()
    head = (
        "Second opinion: agglomerative clustering along the same contacts "
        "(scikit-learn, Ward's linkage; number of groups by the largest "
        "Calinski-Harabasz index)"
    )
    if np.isnan(opinion.agreement):
        return (f"{head} has nothing to part.",)
    return (
        f"{head} parts {opinion.n_sites} residues into "
        f"{number_in_words(opinion.n_groups)} groups, the resting ones among them; its "
        f"agreement with the units here is {opinion.agreement:.2f} by the adjusted "
        "Rand index.",
    )
