"""What is looked at beside the units, to show on what they hang."""

from dataclasses import dataclass

from structmap.motional_units.choices import Alternative
from structmap.motional_units.other_part import OtherPart
from structmap.motional_units.second_opinion import SecondOpinion


@dataclass(frozen=True, slots=True, kw_only=True)
class Beside:
    """What is looked at beside the units.

    Attributes
    ----------
    other_part : OtherPart or None
        The part of the profiles that was not grouped; None without such a part.
    choices : tuple of Alternative
        How the units change when choices are made otherwise.
    second_opinion : SecondOpinion or None
        None unless asked for.
    """

    other_part: OtherPart | None = None
    choices: tuple[Alternative, ...] = ()
    second_opinion: SecondOpinion | None = None
