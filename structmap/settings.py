"""Every choice of an analysis, in one frozen record."""

import difflib
import json
import re
from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any, Literal, get_args, get_origin, get_type_hints

from structmap.errors import SettingError

ProfilePart = Literal["auto", "whole", "shape", "level"]
Direction = Literal["both", "up", "down"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """Every choice of an analysis.

    Attributes
    ----------
    cutoff_angstrom : float
        Two residues touch when heavy atoms come this close.
    ca_cutoff_angstrom : float
        The same between CA atoms, for files that hold nothing else.
    assembly : str
        Which biological assemblies make contacts `complex`: ``auto`` (those the
        authors determined, else those software did), ``none``, or ids of the file
        parted by commas.
    coordinate_model : int
        Number of the coordinate model to use alone; 0 is the first of a crystal and all
        of an ensemble.
    offset : int or None
        Number to add to the table's residue numbers to get the file's; None lets the
        match find it.
    mapping : str
        Path of a table that lays each number of the values on a residue of the
        coordinates; blank for none.
    named_chains_only : bool
        Chains of equal sequence that the table does not name are not copies.
    quantity : tuple of str
        Quantities that enter the grouping; empty takes all that have errors, else the
        first.
    profile_part : {'auto', 'whole', 'shape', 'level'}
        What of a profile is compared. ``auto`` is ``shape`` for a named model of
        relaxation, else ``whole``.
    model : str
        Name of the process model that the profiles follow; blank for none.
    process_quantity : str
        Quantity that the model is fitted to, when it is not the one that enters the
        grouping; the test then confirms units that were formed on another quantity.
    reference : {'random', 'clustered'}
        Groups that the agreement of a unit is compared with: random ones, or those
        that the same search finds when the profiles are put on random sites.
    direction : {'both', 'up', 'down'}
        Which way units may deviate from the baseline.
    low_moves : tuple of str
        Quantities of which a low value means motion; order parameters, heteronuclear
        NOE and protection factors are known by their names. Only the words change.
    baseline : str
        The baseline when it is known: a number in the unit of the values, or the name
        of a quantity in the table that holds it for each site (a reference state);
        blank finds it from the sites at rest.
    exclude : tuple of str
        Sites to leave out, written ``A/56A`` or ``56A``.
    columns : tuple of str
        Column names of a table without a header, ``-`` skips one.
    proton_frequency_megahertz : float
        Larmor frequency of the protons; 0 is not given.
    mas_rate_hertz : float
        Rate of magic-angle spinning; 0 is not given.
    sample : {'protonated', 'deuterated'}
        Decides below which spin-lock field points are left out.
    sample_cell : str
        Unit cell of the crystal that was measured: ``a b c alpha beta gamma`` in Å and
        degrees; blank when it is not known to differ from the file's.
    sample_space_group : str
        Its space group; blank when not given.
    network : bool
        Whether an elastic network is asked as well, as evidence of a model beside the
        measured values.
    nucleus : {'15N', '1H'}
        What is observed in a spin lock.
    homonuclear : bool
        For observed protons, whether the coupling between protons counts; the verdict
        is found with the other choice too.
    lowest_field_hertz : float
        Spin-lock field below which points are left out; 0 takes the rule for the
        sample.
    largest_offset_hertz : float
        Largest plausible distance of a resonance from the carrier, for points to be
        taken with caution; 0 is not given.
    protein_molar : float
        Total protein of a titration in mol/L, for the depletion of the ligand; 0
        neglects it.
    errors_trusted : bool
        The errors are known to be right, so that one of the two chances of the test of
        one process, that of the stated errors, decides alone.
    keep_points : bool
        Keep the points of a profile that are left out as not motion alone.
    most_permutations : int
        Most permutations of a test whose p lies at the border of 0.05; 0 leaves the
        tests of chance and stability out.
    repeats : int
        Searches with redrawn errors behind stability and behind membership.
    second_opinion : bool
        Hold the units against scikit-learn's agglomerative clustering along the same
        contacts.
    title : str
        What was measured, for the head of the page; blank makes one.
    data_note : str
        What kind of data this is, for the foot of the page.
    seed : int
        Seed of every random step.
    """

    cutoff_angstrom: float = 4.5
    ca_cutoff_angstrom: float = 7.5
    assembly: str = "auto"
    coordinate_model: int = 0
    offset: int | None = None
    mapping: str = ""
    named_chains_only: bool = False
    quantity: tuple[str, ...] = ()
    profile_part: ProfilePart = "auto"
    model: str = ""
    process_quantity: str = ""
    reference: Literal["random", "clustered"] = "random"
    direction: Direction = "both"
    low_moves: tuple[str, ...] = ()
    baseline: str = ""
    exclude: tuple[str, ...] = ()
    columns: tuple[str, ...] = ()
    proton_frequency_megahertz: float = 0.0
    mas_rate_hertz: float = 0.0
    sample: Literal["protonated", "deuterated"] = "protonated"
    sample_cell: str = ""
    sample_space_group: str = ""
    network: bool = False
    nucleus: Literal["15N", "1H"] = "15N"
    homonuclear: bool = True
    lowest_field_hertz: float = 0.0
    largest_offset_hertz: float = 0.0
    protein_molar: float = 0.0
    errors_trusted: bool = False
    keep_points: bool = False
    most_permutations: int = 9999
    repeats: int = 100
    second_opinion: bool = False
    title: str = ""
    data_note: str = ""
    seed: int = 20260


def make_settings(given: Mapping[str, Any], *, source: str = "settings") -> Settings:
    """Return settings with some values given by name, each checked.

    Parameters
    ----------
    given : mapping of str to object
        Names of fields and their values.
    source : str, default "settings"
        Where they come from, for the message.

    Returns
    -------
    Settings
        Defaults for the rest.

    Raises
    ------
    SettingError
        If a name is unknown or a value has another type or is out of range.
    """
    types = get_type_hints(Settings)
    checked = {}
    for name, value in given.items():
        if name not in types:
            near = difflib.get_close_matches(name, types, n=1)
            hint = f"did you mean {near[0]}?" if near else "remove it"
            raise SettingError(source, name, "is no setting", hint)
        checked[name] = _checked(name, value, types[name], source=source)
    return Settings(**checked)


def _checked(name: str, value: Any, kind: Any, *, source: str) -> Any:
    """Return a value in the type of its field."""
    if get_origin(kind) is Literal:
        if value not in get_args(kind):
            choices = ", ".join(get_args(kind))
            raise SettingError(
                source, name, f"is {value!r}", f"choose one of {choices}"
            )
        return value
    if get_origin(kind) is tuple:
        value = [value] if isinstance(value, str) else value
        if isinstance(value, list | tuple) and all(
            isinstance(part, str) for part in value
        ):
            return tuple(value)
        raise SettingError(source, name, f"is {value!r}", "give a list of texts")
    return _checked_scalar(name, value, kind, source=source)


def _checked_scalar(name: str, value: Any, kind: Any, *, source: str) -> Any:
    plain = next(part for part in (get_args(kind) or (kind,)) if part is not type(None))
    if (
        plain is float
        and isinstance(value, int | float)
        and not isinstance(value, bool)
    ):
        if not 0 <= value < float("inf"):
            raise SettingError(
                source, name, f"is {value}", "give a number of 0 or more"
            )
        return float(value)
    if plain in (bool, str) and isinstance(value, plain):
        return value
    if plain is int and isinstance(value, int) and not isinstance(value, bool):
        return value
    wanted = {
        float: "a number",
        int: "a whole number",
        bool: "true or false",
        str: "a text",
    }
    raise SettingError(source, name, f"is {value!r}", f"give {wanted[plain]}")


def describe_settings() -> dict[str, str]:
    """Return what each setting means.

    Returns
    -------
    dict of str to str
        Name and one paragraph, in the order of the record.
    """
    text = Settings.__doc__ or ""
    found = re.findall(
        r"^    (\w+) : [^\n]*\n((?:        [^\n]*\n?)+)", text, flags=re.MULTILINE
    )
    said = {name: " ".join(body.split()).replace("``", "") for name, body in found}
    return {field.name: said.get(field.name, "") for field in fields(Settings)}


def settings_text(settings: Settings | None = None) -> str:
    """Return settings as a commented TOML file.

    Parameters
    ----------
    settings : Settings, optional
        The defaults when left out.

    Returns
    -------
    str
        A file that ``--settings`` reads.
    """
    settings = settings or Settings()
    lines = [
        "# Settings of structmap with their defaults; remove what you do not change."
    ]
    for name, meaning in describe_settings().items():
        value = getattr(settings, name)
        lines += ["", f"# {meaning}"]
        if value is None:
            lines.append(f"# {name} =")
        else:
            written = list(value) if isinstance(value, tuple) else value
            lines.append(f"{name} = {json.dumps(written, ensure_ascii=False)}")
    return "\n".join(lines) + "\n"
