"""What spin-lock points an experiment can carry, and units of measurement."""

import pickle

import numpy as np
import pytest

from structmap.errors import UnknownUnitError
from structmap.experiment import (
    Experiment,
    convert_to_base,
    find_coherent_points,
    find_doubtful_points,
    guard_band_hertz,
    lowest_field_hertz,
    points_left_out,
    points_with_caution,
)


def left_out(
    fields_khz, mas_khz=60.0, sample="deuterated", model="mas-r1rho", proton=600.0
):
    return points_left_out(
        np.array(fields_khz) * 1e3,
        model_name=model,
        mas_rate_hertz=mas_khz * 1e3,
        proton_frequency_megahertz=proton,
        sample=sample,
    )


def test_leaves_out_the_guard_bands_of_one_and_two_times_the_spinning_rate():
    # The true rate of a rigid N-H pair is a tenth off at 3 kHz from the condition
    # (stochastic Liouville simulation, nu_r 60 kHz); 5 % is the spread of the field.
    fields = [56.9, 57.0, 60.0, 63.0, 63.1, 113.9, 114.0, 126.0, 126.1]
    reasons = left_out(fields)
    kept = [field for field, reason in zip(fields, reasons, strict=True) if not reason]
    assert kept == [56.9, 63.1, 113.9, 126.1]
    assert reasons[1] == "within 3 kHz of the spinning rate"
    assert reasons[6] == "within 6 kHz of twice the spinning rate"


def test_guard_band_follows_coupling_and_spread():
    weak = Experiment(mas_rate_hertz=20e3, coupling_hertz=2500.0)
    assert guard_band_hertz(weak, 20e3) == pytest.approx(1000.0)
    assert guard_band_hertz(weak, 10e3) == pytest.approx(3000.0 * 2500.0 / 11480.0)


@pytest.mark.parametrize(
    ("sample", "proton", "expected"),
    [
        ("protonated", 0.0, 10e3),
        ("protonated", 600.0, 10e3),
        ("protonated", 800.0, 12.8e3),
        ("deuterated", 400.0, 2e3),
        ("deuterated", 800.0, 3.2e3),
    ],
)
def test_lowest_field_grows_with_the_magnet(sample, proton, expected):
    experiment = Experiment(sample=sample, proton_frequency_megahertz=proton)
    assert lowest_field_hertz(experiment) == pytest.approx(expected)


def test_names_the_coherent_points_at_low_field():
    assert left_out([5.0, 12.0], sample="protonated") == ("below 10 kHz: coherent", "")
    assert find_coherent_points([5e3], Experiment(lowest_field_hertz=4e3)) == ("",)


def test_keeps_everything_for_other_models_and_without_a_spinning_rate():
    assert left_out([0.1, 60.0], model="cpmg") == ("", "")
    assert left_out([0.1, 60.0], mas_khz=0.0) == ("", "")


def test_half_the_spinning_rate_is_left_out_for_protons_only():
    proton = Experiment(mas_rate_hertz=60e3, nucleus="1H", sample="deuterated")
    nitrogen = Experiment(mas_rate_hertz=60e3, nucleus="15N", sample="deuterated")
    assert find_coherent_points([30e3], proton) == (
        "within 3 kHz of half the spinning rate",
    )
    assert find_coherent_points([30e3], nitrogen) == ("",)
    assert find_doubtful_points([30e3], nitrogen) == ("near half the spinning rate",)


def test_caution_covers_ten_kilohertz_but_not_what_is_left_out():
    flagged = points_with_caution(
        np.array([49.9, 50.0, 52.0, 57.0, 69.0]) * 1e3,
        model_name="mas-r1rho",
        mas_rate_hertz=60e3,
        proton_frequency_megahertz=600.0,
        sample="deuterated",
    )
    near = "closer than 10 kHz to the spinning rate"
    assert flagged == ("", "", near, "", near)


def test_unknown_offset_flags_low_fields():
    experiment = Experiment(sample="deuterated", largest_offset_hertz=2e3)
    assert find_doubtful_points([9e3, 11e3], experiment) == (
        "below 5 times the largest offset",
        "",
    )


def test_refuses_a_negative_field():
    with pytest.raises(ValueError, match=r"^spin_lock_hertz holds -5\.0"):
        left_out([-0.005])


@pytest.mark.parametrize(
    ("value", "unit", "expected"),
    [
        (5.0, "kHz", 5000.0),
        (5.0, "Hz", 5.0),
        (3.0, "ms", 3e-3),
        (3.0, "µs", 3e-6),
        (2.0, "min", 120.0),
        (40.0, "uM", 4e-5),
        (40.0, "μM", 4e-5),
        (1.5, "mM", 1.5e-3),
        (25.0, "°C", 298.15),
        (298.15, "K", 298.15),
    ],
)
def test_converts_units(value, unit, expected):
    assert convert_to_base([value], unit, quantity="x")[0] == pytest.approx(
        expected, rel=1e-12
    )


@pytest.mark.parametrize(
    ("unit", "base"), [("furlong", ""), ("", "Hz"), ("s", "Hz"), ("mm", "M")]
)
def test_refuses_units_that_do_not_fit(unit, base):
    with pytest.raises(UnknownUnitError, match=r"^x of the profile: .* in brackets"):
        convert_to_base([1.0], unit, quantity="x of the profile", base=base)


def test_unit_error_survives_pickling():
    error = UnknownUnitError("x", "furlong", "Hz")
    assert str(pickle.loads(pickle.dumps(error))) == str(error)
