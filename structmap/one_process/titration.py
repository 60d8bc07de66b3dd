"""Binding of a ligand, one to one, and melting between two states."""

import numpy as np
from numpy.typing import ArrayLike

from structmap.one_process.constants import GAS_CONSTANT
from structmap.one_process.model import FloatArray, Model, Parameter


def bound_fraction(
    ligand_molar: ArrayLike,
    dissociation_constant_molar: ArrayLike,
    *,
    protein_molar: ArrayLike,
) -> FloatArray:
    """Return the fraction of a protein that has bound its ligand.

    Parameters
    ----------
    ligand_molar : array_like
        Total concentrations of the ligand.
    dissociation_constant_molar : array_like
        Dissociation constant; broadcasts.
    protein_molar : array_like
        Total concentrations of the protein, which may fall by dilution.

    Returns
    -------
    ndarray of float
        Between 0 and 1, from the law of mass action with depletion of both partners.
    """
    ligand = np.asarray(ligand_molar, dtype=np.float64)
    protein = np.asarray(protein_molar, dtype=np.float64)
    total = protein + ligand + np.asarray(dissociation_constant_molar)
    # This form of the root does not cancel when little is bound.
    return np.asarray(2 * ligand / (total + np.sqrt(total**2 - 4 * protein * ligand)))


def binding_model(protein_molar: ArrayLike = 0.0) -> Model:
    """Return the model of a titration with one dissociation constant.

    Parameters
    ----------
    protein_molar : array_like, optional
        Total protein, one number or one for each point; 0 neglects depletion, so that
        the fraction is L / (L + K_d).

    Returns
    -------
    Model
        Named ``binding``, shared parameter K_d in M; x is total ligand in M.

    Notes
    -----
    Shifts follow it in fast exchange only; in slow exchange give the intensity of the
    peak of the bound state.
    """
    protein = np.asarray(protein_molar, dtype=np.float64)

    def function(x: FloatArray, constant: FloatArray) -> FloatArray:
        if protein.ndim and len(x) != len(protein):
            order = np.linspace(0, 1, len(protein))
            between = np.interp(np.linspace(0, 1, len(x)), order, protein)
            return bound_fraction(x, constant, protein_molar=between)
        return bound_fraction(x, constant, protein_molar=protein)

    return Model(
        name="binding",
        describes="binding of one ligand",
        function=function,
        shared=Parameter(name="K_d", unit="M", bounds=_constant_bounds),
        x_unit="M",
        source="law of mass action",
    )


def unfolded_fraction(
    temperature_kelvin: ArrayLike,
    midpoint_kelvin: ArrayLike,
    enthalpy_joule_per_mole: ArrayLike,
) -> FloatArray:
    """Return the unfolded fraction of a protein with two states.

    Parameters
    ----------
    temperature_kelvin : array_like
        Temperatures, above 0.
    midpoint_kelvin : array_like
        Temperature at which half is unfolded; broadcasts.
    enthalpy_joule_per_mole : array_like
        Van 't Hoff enthalpy of unfolding, taken as constant; broadcasts.

    Returns
    -------
    ndarray of float
        K / (1 + K) with ln K = (H / R) (1 / T_m - 1 / T).
    """
    inverse = 1 / np.asarray(midpoint_kelvin) - 1 / np.asarray(temperature_kelvin)
    exponent = np.asarray(enthalpy_joule_per_mole) / GAS_CONSTANT * inverse
    return np.asarray((1 + np.tanh(exponent / 2)) / 2)


def melting_model() -> Model:
    """Return the model of two-state melting with a shared midpoint.

    Returns
    -------
    Model
        Named ``melting``, shared parameter T_m in K; each site has its own van 't Hoff
        enthalpy and its own level in either state.
    """
    return Model(
        name="melting",
        describes="two-state melting",
        function=unfolded_fraction,
        shared=Parameter(
            name="T_m", unit="K", bounds=_midpoint_bounds, scale="linear", nodes=81
        ),
        local=Parameter(
            name="enthalpy", unit="J/mol", bounds=lambda _: (2e4, 2e6), nodes=20
        ),
        x_unit="K",
        x_lowest=1.0,
        min_points=6,
        source="van 't Hoff equation",
    )


def _constant_bounds(ligand: FloatArray) -> tuple[float, float]:
    present = ligand[ligand > 0]
    return float(present.min() * 1e-3), float(present.max() * 100)


def _midpoint_bounds(temperature: FloatArray) -> tuple[float, float]:
    return float(temperature.min()), float(temperature.max())
