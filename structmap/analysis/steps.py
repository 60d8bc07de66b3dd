"""Steps that take their choices from the settings."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from structmap.contacts import contact_cutoff
from structmap.experiment import (
    SPINNING_MODEL,
    Experiment,
    convert_to_base,
    find_coherent_points,
)
from structmap.one_process import Conditions, at_conditions
from structmap.settings import Settings
from structmap.sites import Sites, match_sites
from structmap.structure import Structure
from structmap.values import ValueTable, read_mapping

Progress = Callable[[str, float], None]


def say_nothing(step: str, share: float) -> None:
    """Show no progress.

    Parameters
    ----------
    step : str
        Name of the step.
    share : float
        Share done.
    """
    del step, share


def match_by_settings(
    structure: Structure, table: ValueTable, settings: Settings
) -> Sites:
    """Match the numbering as the settings say.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    table : ValueTable
        The measured values.
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    Sites
        Measured sites with their copies.

    Raises
    ------
    StructmapError
        If the numbering is ambiguous or does not fit.
    """
    return match_sites(
        structure,
        table,
        offset=settings.offset,
        mapping=read_mapping(Path(settings.mapping)) if settings.mapping else None,
        named_chains_only=settings.named_chains_only,
        exclude=settings.exclude,
    )


def cutoff_of(structure: Structure, settings: Settings) -> float:
    """Return the cutoff for a file: between heavy atoms, or between CA atoms.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    float
        In Å.
    """
    return contact_cutoff(
        structure,
        cutoff_angstrom=settings.cutoff_angstrom,
        ca_cutoff_angstrom=settings.ca_cutoff_angstrom,
    )


def experiment_of(settings: Settings) -> Experiment:
    """Return the conditions of the experiment that the settings name.

    Parameters
    ----------
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    Experiment
        Which points it can carry follows from it.
    """
    return Experiment(
        mas_rate_hertz=settings.mas_rate_hertz,
        proton_frequency_megahertz=settings.proton_frequency_megahertz,
        sample=settings.sample,
        nucleus=settings.nucleus,
        lowest_field_hertz=settings.lowest_field_hertz,
        largest_offset_hertz=settings.largest_offset_hertz,
    )


def point_reasons(table: ValueTable, settings: Settings) -> tuple[str, ...]:
    """Return why points of the profile cannot be carried.

    Parameters
    ----------
    table : ValueTable
        The measured values.
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    tuple of str
        One a point, blank where it is kept; empty without a profile.

    Raises
    ------
    UnknownUnitError
        If the spin-lock field has no unit that is known.
    """
    profiles = [q for q in table.quantities if len(q.x)]
    if settings.quantity:
        profiles = [q for q in profiles if q.name in settings.quantity]
    if not profiles:
        return ()
    profile = profiles[0]
    if settings.model != SPINNING_MODEL or settings.keep_points:
        return ("",) * len(profile.x)
    field = convert_to_base(
        profile.x, profile.x_unit, quantity=profile.x_name, base="Hz"
    )
    known = at_conditions(profile, Conditions(experiment=experiment_of(settings)))
    if not known.experiment.mas_rate_hertz > 0:
        return ("",) * len(profile.x)
    return find_coherent_points(field, known.experiment)


def kept_points_note(table: ValueTable, settings: Settings) -> tuple[str, ...]:
    """Say which points were put back that are not motion alone.

    Parameters
    ----------
    table : ValueTable
        The measured values.
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    tuple of str
        One sentence, or none where nothing was put back.

    Raises
    ------
    UnknownUnitError
        If the spin-lock field has no unit that is known.
    """
    if not settings.keep_points:
        return ()
    reasons = point_reasons(table, replace(settings, keep_points=False))
    put_back = [reason for reason in reasons if reason]
    if not put_back:
        return ()
    listed = "; ".join(dict.fromkeys(put_back))
    noun = "point" if len(put_back) == 1 else "points"
    return (
        f"{len(put_back)} {noun} a profile that would be left out ({listed}) were kept "
        "on demand; what they show need not be motion.",
    )
