import numpy as np
import pytest

from structmap.analysis import analyse, example_folder
from structmap.lattice import roman_numeral
from structmap.settings import Settings
from structmap.words import errors_off_baseline, number_in_words, p_text


@pytest.fixture(scope="module")
def example_record():
    folder = example_folder()
    return analyse(
        folder / "4cup.cif.gz",
        folder / "invented_values.csv",
        Settings(profile_part="shape", most_permutations=0),
    ).record


def test_numbers_up_to_twelve_are_words():
    assert [number_in_words(n) for n in (0, 1, 12, 13, 1234)] == [
        "no",
        "one",
        "twelve",
        "13",
        "1234",
    ]
    assert number_in_words(18800) == "18\u202f800"


def test_a_p_value_is_never_zero_nor_over_exact():
    assert p_text(0.00021) == "<\u00a00.001"
    assert p_text(0.0213) == "0.021"
    assert p_text(0.999) == "1.0"


def test_roman_numerals_by_the_subtractive_rule():
    # Common practice, no source.
    known = {1: "I", 4: "IV", 9: "IX", 14: "XIV", 40: "XL", 90: "XC", 1994: "MCMXCIV"}
    assert {n: roman_numeral(n) for n in known} == known


@pytest.mark.parametrize("number", [0, -1, 4000])
def test_no_roman_numeral_outside_its_range(number):
    with pytest.raises(ValueError, match=rf"^number is {number}; it must be from 1"):
        roman_numeral(number)


def test_sites_at_rest_lie_around_no_error_off_the_baseline(example_record):
    off = errors_off_baseline(example_record)
    quiet = off[~example_record.behaviour.moves]
    # The sizes of normal noise in twelve points, told as one normal variable each.
    assert abs(np.median(quiet)) < 0.5
    assert np.percentile(quiet, 95) < 3.0
    assert off[example_record.behaviour.moves].min() > 2.0
    order = np.argsort(example_record.behaviour.deviation)
    assert (np.diff(off[order]) > -1.0).all()
