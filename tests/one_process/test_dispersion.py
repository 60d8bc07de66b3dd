"""Spin-lock relaxation under magic-angle spinning against tabulated rates.

Figures were computed from the published formula (Kurbanov, Zinkevich and
Krushelnitsky 2011) by an independent program and, for the part that depends on the
field, checked there against a stochastic Liouville simulation.
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from structmap.experiment import Experiment
from structmap.one_process.constants import Couplings
from structmap.one_process.dispersion import (
    SimpleMotion,
    averaged_density,
    correct_for_tilt,
    homonuclear_rate,
    interaction_strengths,
    motion_kernel,
    proton_coupling_radian_per_second,
    spin_lock_rates,
    spinning_model,
    tilt_sine_squared,
)

CONDITIONS = Experiment(mas_rate_hertz=60e3, proton_frequency_megahertz=600.0)
EXACT = 1e-6


@pytest.mark.parametrize(
    ("place", "mean", "transverse", "r1", "kernel"),
    [
        ((20e3, 0, 1e-5), 5.159464e-9, 18.37243, 2.984720e-5, 918.6210),
        ((20e3, 0, 1e-6), 6.344667e-9, 22.59298, 2.984700e-4, 1129.641),
        ((40e3, 0, 1e-5), 1.163642e-8, 41.43635, 2.984720e-5, 2071.817),
        ((20e3, 10e3, 1e-5), 5.514340e-9, 19.63612, 2.984720e-5, 981.8052),
        ((20e3, 0, 1e-9), 7.999998e-12, 0.05196618, 0.04285534, 1.424366),
    ],
)
def test_rates_of_an_amide_at_600_megahertz(place, mean, transverse, r1, kernel):
    field, offset, tau = place
    motion = SimpleMotion(tau_second=tau, amplitude=0.02)
    rates = spin_lock_rates([field], motion, experiment=CONDITIONS, offset_hertz=offset)
    assert rates.averaged_density[0] == pytest.approx(mean, rel=EXACT)
    assert rates.transverse[0] == pytest.approx(transverse, rel=EXACT)
    assert rates.r1 == pytest.approx(r1, rel=EXACT)
    effective = np.hypot(field, offset)
    found = motion_kernel([effective], tau, experiment=CONDITIONS)
    assert found[0] == pytest.approx(kernel, rel=EXACT)


def test_tilted_rate_off_resonance():
    motion = SimpleMotion(tau_second=1e-5, amplitude=0.02)
    rates = spin_lock_rates([20e3], motion, experiment=CONDITIONS, offset_hertz=10e3)
    assert rates.r1rho[0] == pytest.approx(15.70890, rel=EXACT)


def test_couplings_of_the_amide():
    pair = Couplings()
    dipole = pair.dipole_radian_per_second()
    assert dipole == pytest.approx(-72114.75, rel=EXACT)
    assert dipole / (2 * np.pi) == pytest.approx(-11477.42, rel=EXACT)
    assert pair.shift_radian_per_second(600.0) == pytest.approx(37960.14, rel=EXACT)


@pytest.mark.parametrize(
    ("field", "offset", "tau", "expected"),
    [(10e3, 8e3, 1e-6, 0.1717065), (10e3, 0.0, 1e-5, 0.2291484)],
)
def test_homonuclear_rate(field, offset, tau, expected):
    # Stochastic Liouville simulation of a proton pair agrees within 3e-4.
    rate = homonuclear_rate(
        [field],
        tau,
        coupling_radian_per_second=2 * np.pi * 1e3,
        mas_rate_hertz=60e3,
        offset_hertz=offset,
    )
    assert 0.02 * rate[0] == pytest.approx(expected, rel=EXACT)


def test_proton_coupling_at_two_and_a_half_angstrom():
    found = proton_coupling_radian_per_second(2.5) / (2 * np.pi)
    assert found == pytest.approx(7687.690, rel=EXACT)


def test_static_limit_of_like_spins_is_the_rotating_frame_formula():
    # (9/20) K^2 tau on resonance for tau times field well below 1: like-spin T1rho,
    # Abragam, Principles of Nuclear Magnetism (1961), from memory.
    rate = homonuclear_rate(
        [1.0], 1e-9, coupling_radian_per_second=1e4, mas_rate_hertz=1e-3
    )
    assert rate[0] == pytest.approx(9 / 20 * 1e8 * 1e-9, rel=1e-6)


@pytest.mark.parametrize(
    ("offset", "expected"),
    [(500, 0.9901), (1000, 0.9615), (2000, 0.8621), (3000, 0.7353)],
)
def test_tilt_at_five_kilohertz(offset, expected):
    assert tilt_sine_squared(5e3, offset) == pytest.approx(expected, abs=5e-5)


def test_tilt_correction_undoes_the_tilt():
    motion = SimpleMotion(tau_second=1e-5, amplitude=0.02)
    rates = spin_lock_rates([5e3, 9e3], motion, experiment=CONDITIONS, offset_hertz=3e3)
    back = correct_for_tilt(
        rates.r1rho,
        [0.1, 0.1],
        r1=rates.r1,
        spin_lock_hertz=[5e3, 9e3],
        offset_hertz=3e3,
    )
    np.testing.assert_allclose(back.rate, rates.transverse, rtol=1e-12)
    np.testing.assert_allclose(back.effective_field_hertz, np.hypot([5e3, 9e3], 3e3))
    assert (back.error > 0.1).all()


@given(
    tau=st.floats(1e-8, 1e-3),
    field=st.floats(1e3, 5e4),
    distance=st.floats(0.9, 1.2),
)
def test_bond_length_scales_the_amplitude_but_not_the_shape(tau, field, distance):
    pair = Couplings(distance_angstrom=distance)
    kernel = motion_kernel([field, 2e4], tau, experiment=CONDITIONS, couplings=pair)
    plain = motion_kernel([field, 2e4], tau, experiment=CONDITIONS)
    assert kernel[0] / kernel[1] == pytest.approx(plain[0] / plain[1], rel=1e-9)


def test_rate_peaks_at_the_rotary_resonances():
    fields = np.linspace(1e3, 150e3, 2000)
    density = averaged_density(2 * np.pi * fields, 1e-4, mas_rate_hertz=60e3)
    peaks = fields[1:-1][(density[1:-1] > density[:-2]) & (density[1:-1] > density[2:])]
    np.testing.assert_allclose(peaks, [60e3, 120e3], rtol=2e-3)


def test_shift_anisotropy_can_be_switched_off():
    dipole, shift = interaction_strengths(CONDITIONS)
    assert shift / (dipole + shift) == pytest.approx(0.2698, abs=5e-4)
    none = interaction_strengths(CONDITIONS, Couplings(shift_anisotropy_ppm=0.0))
    assert none == pytest.approx((dipole, 0.0))


def test_protons_feel_each_other_unless_switched_off():
    proton = Experiment(mas_rate_hertz=60e3, nucleus="1H")
    x = np.array([12e3, 20e3])
    with_pairs = spinning_model(proton).function(x, np.array([[1e-5]]))
    alone = spinning_model(proton, homonuclear=False).function(x, np.array([[1e-5]]))
    coupling = proton_coupling_radian_per_second(2.5)
    extra = homonuclear_rate(
        x, 1e-5, coupling_radian_per_second=coupling, mas_rate_hertz=60e3
    )
    np.testing.assert_allclose(with_pairs - alone, extra[None], rtol=1e-12)


def test_refuses_to_model_a_sample_that_does_not_spin():
    with pytest.raises(
        ValueError, match=r"^mas_rate_hertz is 0\.0; it must be above 0"
    ):
        spinning_model(Experiment())
