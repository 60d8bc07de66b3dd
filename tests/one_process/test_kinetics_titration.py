"""Kinetics, binding and melting against worked figures and independent solutions."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from structmap.one_process.kinetics import build_up_with_loss, exponential_decay
from structmap.one_process.titration import bound_fraction, unfolded_fraction


def test_decay_and_build_up_at_one_time():
    assert exponential_decay(3.0, 0.5) == pytest.approx(0.2231302, rel=1e-6)
    assert 1 - exponential_decay(3.0, 0.5) == pytest.approx(0.7768698, rel=1e-6)


def test_build_up_with_loss_equals_the_integrated_rate_equations():
    found = build_up_with_loss(5e-3, build_up_second=1e-3, loss_second=20e-3)
    assert found == pytest.approx(0.8126977, rel=1e-6)

    def flow(_, state):
        return [-state[0] / 1e-3, state[0] / 1e-3 - state[1] / 20e-3]

    solved = solve_ivp(flow, (0, 5e-3), [1.0, 0.0], rtol=1e-10, atol=1e-12)
    assert found == pytest.approx(solved.y[1, -1], rel=1e-6)


def test_equal_time_constants_are_refused():
    with pytest.raises(ValueError, match=r"^build_up_second and loss_second are both"):
        build_up_with_loss(1.0, build_up_second=2.0, loss_second=2.0)


@pytest.mark.parametrize(
    ("protein", "ligand", "constant", "bound", "neglecting"),
    [
        (100, 50, 25, 0.3596118, 0.6666667),
        (100, 100, 100, 0.3819660, 0.5000000),
        (50, 10, 1, 0.1951506, 0.9090909),
        (100, 1000, 100, 0.9009805, 0.9090909),
    ],
)
def test_bound_fraction(protein, ligand, constant, bound, neglecting):
    found = bound_fraction(ligand, constant, protein_molar=protein)
    assert found == pytest.approx(bound, rel=1e-6)
    found = bound_fraction(ligand, constant, protein_molar=0.0)
    assert found == pytest.approx(neglecting, rel=1e-6)


@given(
    protein=st.floats(1e-6, 1e-2),
    ligand=st.floats(1e-6, 1e-2),
    constant=st.floats(1e-8, 1e-2),
)
def test_bound_fraction_obeys_mass_action(protein, ligand, constant):
    def imbalance(bound):
        return (protein - bound) * (ligand - bound) - constant * bound

    most = min(protein, ligand)
    expected = brentq(imbalance, 0.0, most, xtol=1e-22, rtol=1e-14) / protein
    found = bound_fraction(ligand, constant, protein_molar=protein)
    assert found == pytest.approx(expected, rel=1e-7)


def test_half_is_unfolded_at_the_midpoint_and_slope_gives_the_enthalpy():
    assert unfolded_fraction(330.0, 330.0, 3e5) == pytest.approx(0.5, abs=1e-12)
    # d ln K / d(1/T) = -H / R, the van 't Hoff equation.
    inverse = np.array([1 / 331.0, 1 / 329.0])
    fraction = unfolded_fraction(1 / inverse, 330.0, 3e5)
    logit = np.log(fraction / (1 - fraction))
    slope = (logit[1] - logit[0]) / (inverse[1] - inverse[0])
    assert -slope * 8.31446261815324 == pytest.approx(3e5, rel=1e-9)
