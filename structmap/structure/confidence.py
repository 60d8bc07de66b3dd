"""Confidence in the residues of a predicted model (pLDDT, 0 to 100).

Levels are those of the AlphaFold Protein Structure Database [1]_, drawn from how
predictions fare against experiment [2]_: below 70 the backbone is often wrong, below 50
the coordinates are not to be interpreted, and such residues are mostly disordered.

References
----------
.. [1] Frequently asked questions, alphafold.ebi.ac.uk (cited from memory).
.. [2] Tunyasuvunakool et al., Nature 596, 590 (2021; cited from memory).
"""

import numpy as np
from numpy.typing import NDArray

from structmap.structure.record import POLYMER, Structure

LOW_CONFIDENCE = 70.0
VERY_LOW_CONFIDENCE = 50.0


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
