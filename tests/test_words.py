import pytest

from structmap.lattice import roman_numeral
from structmap.words import number_in_words, p_text


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
