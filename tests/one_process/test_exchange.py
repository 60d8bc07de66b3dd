"""Two-site exchange against tabulated rates, other formulas and plain integration.

Tabulated figures come from an independent program in which eigenvalue, root of the
characteristic polynomial and numerical integration agreed.
"""

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from scipy.linalg import expm

from structmap.one_process.cpmg import (
    carver_richards_cpmg,
    constant_time_cpmg,
    exact_cpmg,
    exchange_part_cpmg,
    luz_meiboom_cpmg,
)
from structmap.one_process.exchange import (
    TwoSites,
    exact_r1rho,
    exchange_part_r1rho,
    fast_exchange_r1rho,
    has_two_slow_decays,
    laguerre_r1rho,
    trott_palmer_r1rho,
)

EXACT = 1e-6
TURN = 2 * np.pi


def pair(rate, major, shift, *, r1=1.5, r2=10.0, r2_minor=None):
    return TwoSites(
        exchange_rate_per_second=rate,
        major_population=major,
        shift_difference=shift,
        r1=r1,
        r2=r2,
        r2_minor=r2_minor,
    )


@pytest.mark.parametrize(
    ("sites", "field", "offset", "exact", "trott_palmer", "laguerre"),
    [
        (pair(2000, 0.9, TURN * 150), 1000, 0, 13.61073, 13.61680, 13.62454),
        (pair(2000, 0.9, TURN * 150), 1000, 500, 10.48010, 10.47748, 10.48018),
        (pair(3000, 0.7, TURN * 300), 300, 0, 183.8843, 161.5469, 183.1972),
        (pair(1000, 0.5, 2000), 150, 0, 464.5862, 209.4394, 325.8437),
    ],
)
def test_spin_lock_rates(sites, field, offset, exact, trott_palmer, laguerre):
    found = exact_r1rho([field], sites, offset_hertz=offset)
    assert found[0] == pytest.approx(exact, rel=EXACT)
    found = trott_palmer_r1rho([field], sites, offset_hertz=offset)
    assert found[0] == pytest.approx(trott_palmer, rel=EXACT)
    found = laguerre_r1rho([field], sites, offset_hertz=offset)
    assert found[0] == pytest.approx(laguerre, rel=EXACT)


def test_spin_lock_rate_with_different_relaxation_and_in_the_fast_limit():
    unequal = pair(2000, 0.9, TURN * 150, r2_minor=30.0)
    assert exact_r1rho([1000], unequal)[0] == pytest.approx(15.53037, rel=EXACT)
    fast = fast_exchange_r1rho([1000], pair(2000, 0.9, TURN * 150))
    assert fast[0] == pytest.approx(13.67740, rel=EXACT)


def test_spin_lock_rate_is_the_decay_of_the_locked_magnetisation():
    """Integrate the Bloch-McConnell equations (McConnell 1958) and follow the lock."""
    lock, shift, rate, major = TURN * 1000, TURN * 150, 2000.0, 0.9
    state_a, state_b = -(1 - major) * shift, major * shift

    def block(offset):
        return np.array([[-10.0, -offset, 0], [offset, -10.0, -lock], [0, lock, -1.5]])

    forth, back, unit = (1 - major) * rate, major * rate, np.eye(3)
    matrix = np.block(
        [
            [block(state_a) - forth * unit, back * unit],
            [forth * unit, block(state_b) - back * unit],
        ]
    )
    start = np.array([major, 0, 0, 1 - major, 0, 0])
    early, late = (expm(matrix * time) @ start for time in (0.3, 0.4))
    decay = -np.log((late[0] + late[3]) / (early[0] + early[3])) / 0.1
    # The lock is still 5e-3 off at these times; an oscillating part is gone.
    found = exact_r1rho([1000], pair(rate, major, shift))[0]
    assert found == pytest.approx(decay, rel=1e-3)


@given(
    rate=st.floats(20, 2e5),
    major=st.floats(0.5, 0.99),
    shift=st.floats(30, 2e4),
    field=st.floats(30, 1e4),
    offset=st.floats(-500, 500),
)
def test_fast_root_equals_the_eigenvalue(rate, major, shift, field, offset):
    sites = pair(rate, major, shift, r1=0.0, r2=0.0)
    expected = exact_r1rho([field], sites, offset_hertz=offset)[0]
    found = exchange_part_r1rho([field], rate, major, shift, offset)[0]
    assert found == pytest.approx(expected, rel=1e-5, abs=1e-5)


def test_two_similar_slow_decays_are_noticed():
    slow = pair(0.5, 0.5, TURN * 400)
    assert has_two_slow_decays([20.0], slow)[0]
    assert not has_two_slow_decays([1000.0], pair(2000, 0.9, TURN * 150))[0]


@pytest.mark.parametrize(
    ("sites", "fields", "exact", "luz_meiboom"),
    [
        (
            pair(2000, 0.9, TURN * 150),
            (50, 200, 1000),
            (42.19684, 32.81542, 13.01266),
            (45.97471, 34.19716, 13.02850),
        ),
        (
            pair(500, 0.95, TURN * 200),
            (50, 100),
            (30.78469, 30.00776),
            (100.8140, 58.21174),
        ),
        (pair(10000, 0.9, TURN * 150), (200,), (17.32206,), (17.35483,)),
        (pair(500, 0.95, TURN * 200, r2_minor=30.0), (200,), (23.25486,), None),
    ],
)
def test_cpmg_rates_by_both_routes(sites, fields, exact, luz_meiboom):
    np.testing.assert_allclose(exact_cpmg(fields, sites), exact, rtol=EXACT)
    np.testing.assert_allclose(carver_richards_cpmg(fields, sites), exact, rtol=EXACT)
    if luz_meiboom:
        found = luz_meiboom_cpmg(fields, sites)
        np.testing.assert_allclose(found, luz_meiboom, rtol=EXACT)


@given(
    rate=st.floats(20, 2e5),
    major=st.floats(0.5, 0.99),
    shift=st.floats(30, 5e3),
    field=st.floats(10, 2000),
    minor_rate=st.floats(5, 60),
)
def test_propagator_equals_carver_and_richards(rate, major, shift, field, minor_rate):
    sites = pair(rate, major, shift, r2_minor=minor_rate)
    # The formula loses its digits where the two decays of free evolution coincide.
    assume(abs(rate - shift) > 1e-2 * rate or abs(major - 0.5) > 1e-2)
    assert exact_cpmg([field], sites)[0] == pytest.approx(
        carver_richards_cpmg([field], sites)[0], rel=1e-6, abs=1e-6
    )


@given(
    rate=st.floats(10, 2e5),
    major=st.floats(0.5, 0.99),
    shift=st.floats(30, 2e4),
    field=st.floats(10, 5000),
)
def test_fast_cpmg_part_equals_the_propagator(rate, major, shift, field):
    sites = pair(rate, major, shift, r1=0.0, r2=0.0)
    found = exchange_part_cpmg([field], rate, major, shift)[0]
    assert found == pytest.approx(exact_cpmg([field], sites)[0], rel=1e-6, abs=1e-6)


def test_fast_cpmg_part_where_both_decays_of_free_evolution_coincide():
    sites = pair(1000.0, 0.5, 1000.0, r1=0.0, r2=0.0)
    found = exchange_part_cpmg([50.0, 200.0], 1000.0, 0.5, 1000.0)
    np.testing.assert_allclose(found, exact_cpmg([50.0, 200.0], sites), rtol=1e-6)


def test_cpmg_rate_equals_a_general_matrix_exponential():
    sites = pair(800, 0.8, 1500.0, r2_minor=25.0)
    forth, back = 0.2 * 800, 0.8 * 800
    liouvillian = np.array([[-10.0 - forth, back], [forth, -25.0 - back - 1500j]])
    time = 1 / (4 * 120.0)
    cycle = (
        expm(liouvillian * time)
        @ expm(liouvillian.conj() * 2 * time)
        @ expm(liouvillian * time)
    )
    rate = -np.log(np.abs(np.linalg.eigvals(cycle)).max()) / (4 * time)
    assert exact_cpmg([120.0], sites)[0] == pytest.approx(rate, rel=1e-10)


def test_train_of_fixed_length():
    found = constant_time_cpmg([200], pair(2000, 0.9, TURN * 150), duration_second=0.04)
    assert found[0] == pytest.approx(32.24858, rel=EXACT)


def test_long_spacings_do_not_overflow():
    assert np.isfinite(exact_cpmg([10.0], pair(2e5, 0.9, 3000.0)))[0]


def test_refuses_fields_without_a_meaning():
    with pytest.raises(ValueError, match=r"^spin_lock_hertz holds -1\.0"):
        exact_r1rho([-1.0], pair(2000, 0.9, 900))
    with pytest.raises(ValueError, match=r"^cpmg_hertz holds 0\.0"):
        exact_cpmg([0.0], pair(2000, 0.9, 900))
