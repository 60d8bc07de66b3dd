"""Confidence in the residues of a predicted model."""

import numpy as np
from numpy.typing import NDArray

from structmap.structure.record import POLYMER, Structure

# pLDDT below 70 is called low by those who predict (common practice, no source).
LOW_CONFIDENCE = 70.0


def residue_confidence(structure: Structure) -> NDArray[np.float64]:
    """Return the confidence in each residue of a predicted model.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    ndarray of float, shape (n_residues,)
        0 to 100, mean over its atoms; NaN for all in a file that is no prediction.
    """
    n_residues = len(structure.kind_of_residue)
    out = np.full(n_residues, np.nan)
    if structure.is_predicted:
        count = np.bincount(structure.residue_of_atom, minlength=n_residues)
        total = np.bincount(
            structure.residue_of_atom, weights=structure.b_iso, minlength=n_residues
        )
        out[count > 0] = total[count > 0] / count[count > 0]
    return out


def is_low_confidence(structure: Structure) -> NDArray[np.bool_]:
    """Return which polymer residues of a predicted model have low confidence.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.

    Returns
    -------
    ndarray of bool, shape (n_residues,)
        Confidence below 70; all False in a file that is no prediction.
    """
    low = residue_confidence(structure) < LOW_CONFIDENCE
    return np.asarray(low & (structure.kind_of_residue == POLYMER))
