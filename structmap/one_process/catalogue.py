"""The models that structmap knows, by name."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from structmap.errors import MissingConditionError, UnknownProcessModelError
from structmap.experiment import Experiment
from structmap.one_process.cpmg import cpmg_model
from structmap.one_process.dispersion import spinning_model
from structmap.one_process.exchange import exchange_r1rho_model
from structmap.one_process.kinetics import exponential_model
from structmap.one_process.model import Model
from structmap.one_process.model_free import tumbling_model
from structmap.one_process.titration import binding_model, melting_model


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Conditions:
    """What a model must know besides the profiles.

    Attributes
    ----------
    experiment : Experiment
        Spinning rate, proton frequency, sample, observed nucleus.
    protein_molar : ndarray of float
        Total protein of a titration, one number or one a point; 0 neglects depletion.
    observables : tuple of str
        For ``model-free``, R1 or R2 for each point.
    fields_megahertz : tuple of float
        For ``model-free``, the proton frequency of each point.
    homonuclear : bool
        For observed protons, whether the coupling between protons counts.
    keep_points : bool
        Keep points that are not motion alone, as points of caution.
    """

    experiment: Experiment = field(default_factory=Experiment)
    protein_molar: NDArray[np.float64] = field(default_factory=lambda: np.zeros(()))
    observables: tuple[str, ...] = ()
    fields_megahertz: tuple[float, ...] = ()
    homonuclear: bool = True
    keep_points: bool = False


def make_model(name: str, conditions: Conditions) -> Model:
    """Return a model of the catalogue.

    Parameters
    ----------
    name : str
        One of `MODELS`.
    conditions : Conditions
        What it must know.

    Returns
    -------
    Model
        Ready to be fitted.

    Raises
    ------
    UnknownProcessModelError
        If the catalogue has no such model.
    MissingConditionError
        If the model needs a condition that is not given.
    """
    if name not in MODELS:
        raise UnknownProcessModelError(name, tuple(MODELS))
    return MODELS[name](conditions)


def _spinning(conditions: Conditions) -> Model:
    if not conditions.experiment.mas_rate_hertz > 0:
        raise MissingConditionError(
            "mas-r1rho", "the rate of magic-angle spinning", "mas_rate_hertz"
        )
    return spinning_model(conditions.experiment, homonuclear=conditions.homonuclear)


def _tumbling(conditions: Conditions) -> Model:
    if not all(frequency > 0 for frequency in conditions.fields_megahertz):
        raise MissingConditionError(
            "model-free", "the proton frequency", "proton_frequency_megahertz"
        )
    return tumbling_model(conditions.observables, conditions.fields_megahertz)


MODELS: dict[str, Callable[[Conditions], Model]] = {
    "mas-r1rho": _spinning,
    "exchange-r1rho": lambda _: exchange_r1rho_model(),
    "cpmg": lambda _: cpmg_model(),
    "model-free": _tumbling,
    "exponential": lambda _: exponential_model(),
    "binding": lambda conditions: binding_model(conditions.protein_molar),
    "melting": lambda _: melting_model(),
}
"""Makers of the models, each taking the conditions."""
