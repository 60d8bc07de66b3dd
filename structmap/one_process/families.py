"""Spin-lock profiles at several spinning rates and proton frequencies as one."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.experiment import (
    SPINNING_MODEL,
    find_coherent_points,
    find_doubtful_points,
)
from structmap.one_process.catalogue import Conditions, make_model
from structmap.one_process.columns import (
    Columns,
    Prepared,
    checked_x,
    finish,
    refuse_few_points,
)
from structmap.one_process.dispersion import (
    interaction_strengths,
    join_spinning_models,
)
from structmap.one_process.model import FloatArray, Model
from structmap.values import Quantity, ValueTable


def prepare_family(
    table: ValueTable, family: list[Quantity], *, conditions: Conditions
) -> Prepared:
    """Return spin-lock profiles at several conditions as the points of one profile.

    Parameters
    ----------
    table : ValueTable
        Whose quantities they are.
    family : list of Quantity
        One quantity at several spinning rates or proton frequencies.
    conditions : Conditions
        Sample, nucleus, and what a quantity does not state.

    Returns
    -------
    Prepared
        All share the time and the amplitude of a site; each spinning rate and proton
        frequency has a baseline of its own.

    Raises
    ------
    UnusableProfileError
        If too few points are left.
    UnknownUnitError
        If a field has no unit that fits.
    MissingConditionError
        If a spinning rate is not known.
    """
    parts = [_part_of(table, one, conditions) for one in family]
    parts = [part for part in parts if part.keep.any()]
    left_out = tuple(
        f"{name}: {reason}"
        for part in parts
        for name, reason in zip(part.names, part.reasons, strict=True)
        if reason
    )
    model = join_spinning_models(
        [part.model for part in parts],
        [part.x[part.keep] for part in parts],
        names=tuple(
            name
            for part in parts
            for name, kept in zip(part.names, part.keep, strict=True)
            if kept
        ),
    )
    n_points = sum(int(part.keep.sum()) for part in parts)
    refuse_few_points(f"{table.names[0]}, {family[0].base}", n_points, model)
    columns = Columns(
        x=np.arange(float(n_points)),
        value=np.hstack([part.profile.value[:, part.keep] for part in parts]),
        error=np.hstack([part.profile.error[:, part.keep] for part in parts]),
        block=np.repeat(np.arange(len(parts)), [part.keep.sum() for part in parts]),
    )
    doubtful = np.concatenate([part.doubtful[part.keep] for part in parts])
    prepared = finish(table, model, columns, caution=doubtful, left_out=left_out)
    note = (
        f"{len(parts)} spinning rates or proton frequencies are fitted together, each "
        "with a baseline of its own."
    )
    return replace(
        prepared,
        notes=(*prepared.notes, note),
        quantities=tuple(one.name for one in family),
    )


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Part:
    profile: Quantity
    model: Model
    x: FloatArray
    names: tuple[str, ...]
    reasons: tuple[str, ...]
    doubtful: NDArray[np.bool_]

    @property
    def keep(self) -> NDArray[np.bool_]:
        return np.array([not reason for reason in self.reasons])


def _part_of(table: ValueTable, profile: Quantity, conditions: Conditions) -> _Part:
    known = at_conditions(profile, conditions)
    model = make_model(SPINNING_MODEL, known)
    x = checked_x(table, profile, model)
    reasons, doubtful = judge_points(x, known)
    rate = known.experiment.mas_rate_hertz / 1e3
    frequency = known.experiment.proton_frequency_megahertz
    where = f"{rate:g} kHz spinning" + (f", {frequency:g} MHz" if frequency else "")
    return _Part(
        profile=profile,
        model=model,
        x=x,
        names=tuple(f"{v:g} {profile.x_unit} at {where}" for v in profile.x),
        reasons=reasons,
        doubtful=doubtful,
    )


def judge_points(
    x: FloatArray, conditions: Conditions
) -> tuple[tuple[str, ...], NDArray[np.bool_]]:
    """Return why points are left out, and which are kept with caution.

    Parameters
    ----------
    x : ndarray of float, shape (n_points,)
        Spin-lock fields in Hz.
    conditions : Conditions
        The experiment, and whether points are put back.

    Returns
    -------
    reasons : tuple of str
        One a point, blank where it is kept.
    doubtful : ndarray of bool, shape (n_points,)
        Kept with caution.
    """
    reasons = find_coherent_points(x, conditions.experiment)
    doubts = find_doubtful_points(x, conditions.experiment)
    if conditions.keep_points:
        doubts = tuple(map(str.__add__, doubts, reasons))
        reasons = ("",) * len(x)
    return reasons, np.array([bool(doubt) for doubt in doubts])


def at_conditions(profile: Quantity, conditions: Conditions) -> Conditions:
    """Return conditions with those that the table states for a profile.

    Parameters
    ----------
    profile : Quantity
        Its own spinning rate and proton frequency count where stated.
    conditions : Conditions
        What holds else.

    Returns
    -------
    Conditions
        For this profile.
    """
    known = conditions.experiment
    rate, frequency = profile.mas_rate_hertz, profile.proton_frequency_megahertz
    experiment = replace(
        known,
        mas_rate_hertz=rate or known.mas_rate_hertz,
        proton_frequency_megahertz=frequency or known.proton_frequency_megahertz,
    )
    return replace(conditions, experiment=experiment)


def share_note(conditions: Conditions) -> tuple[str, ...]:
    """Say which share of the rate of 15N comes from the shift anisotropy.

    Parameters
    ----------
    conditions : Conditions
        Nucleus and proton frequency.

    Returns
    -------
    tuple of str
        One sentence, or none where it is not known.
    """
    experiment = conditions.experiment
    if experiment.nucleus != "15N" or not experiment.proton_frequency_megahertz > 0:
        return ()
    dipole, shift = interaction_strengths(experiment)
    share = 100 * shift / (dipole + shift)
    return (
        f"Shift anisotropy gives {share:.0f} % of the rate; it changes the amplitude "
        "and never tau.",
    )
