"""Settings as options of a call."""

import argparse
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import Any, get_args, get_origin, get_type_hints

from structmap.errors import FileProblemError
from structmap.settings import Settings, describe_settings, make_settings, settings_text


def add_settings(command: Any, names: Sequence[str]) -> None:
    """Let a command take settings as options.

    Parameters
    ----------
    command : argparse.ArgumentParser
        The parser of the command.
    names : sequence of str
        Names of settings.
    """
    group = command.add_argument_group(
        "settings (the same names stand in a settings file)"
    )
    meanings, types, defaults = (
        describe_settings(),
        get_type_hints(Settings),
        Settings(),
    )
    for name in names:
        option, kind = f"--{name.replace('_', '-')}", types[name]
        shown = f"{meanings[name]} [{_shown(getattr(defaults, name))}]"
        say: dict[str, Any] = {"default": None, "help": shown.replace("%", "%%")}
        say["dest"] = f"setting_{name}"
        if kind is bool:
            group.add_argument(option, action=argparse.BooleanOptionalAction, **say)
        elif get_origin(kind) is tuple:
            group.add_argument(option, type=comma_parted, metavar="A,B,…", **say)
        elif name == "seed" or int in (kind, *get_args(kind)):
            group.add_argument(option, type=int, metavar="N", **say)
        elif kind is float:
            group.add_argument(option, type=float, metavar="X", **say)
        else:
            choices = get_args(kind) or None
            group.add_argument(
                option, choices=choices, metavar=None if choices else "TEXT", **say
            )


def comma_parted(text: str) -> tuple[str, ...]:
    """Return the parts of a word of a call.

    Parameters
    ----------
    text : str
        Parts with commas between them.

    Returns
    -------
    tuple of str
        Without blanks.
    """
    return tuple(part.strip() for part in text.split(",") if part.strip())


def listed_numbers(text: str) -> tuple[float, ...]:
    """Return the numbers of a word of a call.

    Parameters
    ----------
    text : str
        Numbers with commas between them.

    Returns
    -------
    tuple of float
        In the order given.

    Raises
    ------
    ArgumentTypeError
        If a part is no number.
    """
    try:
        return tuple(float(part) for part in comma_parted(text))
    except ValueError as error:
        raise argparse.ArgumentTypeError(
            f"{text!r} is not a list of numbers like 0,50,100"
        ) from error


def weights_by_nucleus(text: str) -> dict[str, float]:
    """Return the weights of nuclei of a word of a call.

    Parameters
    ----------
    text : str
        ``H=1,N=0.14``.

    Returns
    -------
    dict of str to float
        By nucleus.

    Raises
    ------
    ArgumentTypeError
        If a part is not a nucleus and a number.
    """
    parts = [part.partition("=") for part in comma_parted(text)]
    try:
        return {name.strip(): float(number) for name, _, number in parts}
    except ValueError as error:
        raise argparse.ArgumentTypeError(
            f"{text!r} is not a list of weights like H=1,N=0.14"
        ) from error


def _shown(value: Any) -> str:
    if isinstance(value, tuple):
        return ",".join(value) or "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return "none" if value in (None, "") else str(value)


class ShowSettings(argparse.Action):
    """Print all settings and end, as ``--version`` does.

    Parameters
    ----------
    option_strings : sequence of str
        The option as it is written.
    **more : object
        What argparse hands on.
    """

    def __init__(self, option_strings: Sequence[str], **more: Any) -> None:
        more["nargs"] = 0
        super().__init__(option_strings, **more)

    def __call__(self, parser: argparse.ArgumentParser, *rest: Any) -> None:
        """Print and end."""
        del rest
        print(settings_text(), end="")
        parser.exit()


def settings_of(call: argparse.Namespace, **more: Any) -> Settings:
    """Return the settings of a call: file first, then options.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    **more : object
        Settings that come before both.

    Returns
    -------
    Settings
        Checked.

    Raises
    ------
    StructmapError
        If the file cannot be used or a setting is unknown or out of range.
    """
    given: dict[str, Any] = dict(more)
    source = "options"
    if getattr(call, "settings", None):
        source = str(call.settings)
        given |= _read_toml(call.settings)
    options = {
        key.removeprefix("setting_"): value
        for key, value in vars(call).items()
        if key.startswith("setting_") and value is not None
    }
    return make_settings(given | options, source=source)


def _read_toml(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise FileProblemError(
            path, f"cannot be read ({error.strerror})", "check the path"
        ) from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        remedy = "compare with structmap analyse --show-settings"
        raise FileProblemError(path, f"is no TOML file ({error})", remedy) from error
