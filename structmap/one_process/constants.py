"""Constants of nature that the models use, and the couplings of an N-H pair."""

from dataclasses import dataclass

import numpy as np

# CODATA 2018
MAGNETIC_CONSTANT = 1e-7
"""mu_0 / 4 pi in T m A^-1."""
PLANCK_REDUCED = 1.054571817e-34
"""In J s."""
PROTON_GYROMAGNETIC = 2.6752218744e8
"""In rad s^-1 T^-1."""
NITROGEN_GYROMAGNETIC = -2.71261804e7
"""Of 15N, in rad s^-1 T^-1."""
GAS_CONSTANT = 8.31446261815324
"""In J mol^-1 K^-1."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Couplings:
    """Interactions that relax the 15N of an N-H pair.

    Attributes
    ----------
    distance_angstrom : float
        Length of the N-H bond.
    shift_anisotropy_ppm : float
        Anisotropy of the 15N shift, taken as axial; 0 switches its part off.
    """

    distance_angstrom: float = 1.02
    shift_anisotropy_ppm: float = -172.0

    def dipole_radian_per_second(self) -> float:
        """Return the dipolar coupling constant d, negative for 15N-1H.

        Returns
        -------
        float
            The dipolar coupling constant d, negative for 15N-1H.
        """
        distance = self.distance_angstrom * 1e-10
        gammas = PROTON_GYROMAGNETIC * NITROGEN_GYROMAGNETIC
        return MAGNETIC_CONSTANT * PLANCK_REDUCED * gammas / distance**3

    def shift_radian_per_second(self, proton_frequency_megahertz: float) -> float:
        """Return c, the anisotropy of the 15N shift as a frequency over root 3.

        Parameters
        ----------
        proton_frequency_megahertz : float
            Larmor frequency of the protons in MHz.

        Returns
        -------
        float
            C, the anisotropy of the 15N shift as a frequency over root 3.
        """
        nitrogen = larmor_radian_per_second(proton_frequency_megahertz)[1]
        return float(nitrogen * self.shift_anisotropy_ppm * 1e-6 / np.sqrt(3))


def larmor_radian_per_second(proton_frequency_megahertz: float) -> tuple[float, float]:
    """Return the Larmor frequencies of 1H and 15N, with the sign of gamma.

    Parameters
    ----------
    proton_frequency_megahertz : float
        Larmor frequency of the protons in MHz.

    Returns
    -------
    proton : float
        In rad/s.
    nitrogen : float
        In rad/s.
    """
    proton = 2 * np.pi * proton_frequency_megahertz * 1e6
    return proton, proton / PROTON_GYROMAGNETIC * NITROGEN_GYROMAGNETIC
