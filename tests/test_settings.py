import tomllib
from dataclasses import fields

import pytest

from structmap.errors import SettingError
from structmap.settings import Settings, describe_settings, make_settings, settings_text


def test_printed_settings_read_back_as_the_defaults():
    assert make_settings(tomllib.loads(settings_text())) == Settings()


def test_changed_settings_survive_printing_and_reading():
    changed = Settings(
        cutoff_angstrom=5.5,
        offset=-5,
        exclude=("A/3", "B/56A"),
        title='a "b" ρ',
        seed=7,
    )
    text = settings_text(changed)
    assert make_settings(tomllib.loads(text)) == changed


def test_every_setting_is_explained():
    said = describe_settings()
    assert list(said) == [field.name for field in fields(Settings)]
    assert all(len(text) > 15 for text in said.values())


@pytest.mark.parametrize(
    ("given", "message"),
    [
        (
            {"cutof_angstrom": 4},
            r"x\.toml: setting cutof_angstrom is no setting; did you ",
        ),
        ({"hue": 1}, r"setting hue is no setting; remove it"),
        (
            {"cutoff_angstrom": -4.0},
            r"setting cutoff_angstrom is -4\.0; give a number of 0",
        ),
        (
            {"cutoff_angstrom": float("nan")},
            r"cutoff_angstrom is nan; give a number of 0",
        ),
        ({"cutoff_angstrom": "4"}, r"setting cutoff_angstrom is '4'; give a number"),
        ({"seed": 1.5}, r"setting seed is 1\.5; give a whole number"),
        ({"seed": True}, r"setting seed is True; give a whole number"),
        (
            {"named_chains_only": 1},
            r"setting named_chains_only is 1; give true or false",
        ),
        ({"exclude": [3]}, r"setting exclude is \[3\]; give a list of texts"),
        ({"sample": "wet"}, r"sample is 'wet'; choose one of protonated, deuterated"),
    ],
)
def test_refuses_what_a_setting_cannot_be(given, message):
    with pytest.raises(SettingError, match=message):
        make_settings(given, source="x.toml")


def test_one_text_stands_for_a_list_of_one():
    assert make_settings({"exclude": "A/3"}).exclude == ("A/3",)
