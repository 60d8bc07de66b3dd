"""The command line: one command a job, one line an error."""

import argparse
import sys
import textwrap
import tomllib
from collections.abc import Sequence
from dataclasses import fields
from pathlib import Path
from typing import Any, get_args, get_origin, get_type_hints

from structmap.errors import FileProblemError, StructmapError
from structmap.settings import Settings, describe_settings, make_settings, settings_text
from structmap.version import __version__

DONE, UNUSABLE, WRONG_CALL = 0, 1, 2
_CONTACT_SETTINGS = (
    "cutoff_angstrom",
    "ca_cutoff_angstrom",
    "assembly",
    "coordinate_model",
)
_MATCH_SETTINGS = (
    "offset",
    "mapping",
    "named_chains_only",
    "exclude",
    "columns",
    "coordinate_model",
)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Words of the call; those of the process when left out.

    Returns
    -------
    int
        0 done, 1 the input cannot be used, 2 wrong call.
    """
    parser = _parser()
    call = parser.parse_args(arguments)
    if not hasattr(call, "run"):
        parser.print_help()
        return WRONG_CALL
    try:
        call.run(call)
    except StructmapError as error:
        print(f"structmap: {error}", file=sys.stderr)
        return UNUSABLE
    except KeyboardInterrupt:
        print("structmap: stopped; nothing was written", file=sys.stderr)
        return 130
    return DONE


# --- the words of a call --------------------------------------------------------------


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="structmap",
        description="Which residues move, which form one motional unit, and is that "
        "unit a property of the molecule or of how this crystal is packed?",
        epilog="structmap COMMAND --help shows a working example of each command.",
    )
    parser.add_argument(
        "--version", action="version", version=f"structmap {__version__}"
    )
    commands = parser.add_subparsers(title="commands", metavar="COMMAND")
    _add_analyse(commands)
    _add_example(commands)
    _add_match(commands)
    _add_contacts(commands)
    return parser


def _command(commands: Any, name: str, run: Any, *, summary: str, example: str) -> Any:
    command = commands.add_parser(
        name,
        help=summary,
        description=summary[0].upper() + summary[1:] + ".",
        epilog=f"example:\n{textwrap.indent(example, '  ')}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    command.set_defaults(run=run)
    command.add_argument(
        "--quiet", action="store_true", help="write nothing to the terminal"
    )
    return command


def _add_analyse(commands: Any) -> None:
    command = _command(
        commands,
        "analyse",
        _run_analyse,
        summary="find the motional units and what holds them together: tables, page",
        example="structmap example -o try\n"
        "structmap analyse try/4cup.cif.gz try/invented_values.csv -o mine \\\n"
        "    --model mas-r1rho --mas-rate-hertz 60000 --sample deuterated",
    )
    command.add_argument(
        "coordinates", type=Path, help="mmCIF or PDB file, gzipped or not"
    )
    command.add_argument(
        "values", type=Path, nargs="+", help="tables of values, joined by site"
    )
    command.add_argument(
        "-o", "--output", type=Path, required=True, help="folder to write"
    )
    command.add_argument("--settings", type=Path, help="TOML file of settings")
    command.add_argument(
        "--show-settings",
        action=_ShowSettings,
        help="print all settings as TOML and stop",
    )
    _add_settings(command, [field.name for field in fields(Settings)])


def _add_example(commands: Any) -> None:
    command = _command(
        commands,
        "example",
        _run_example,
        summary="run the main job on the built-in example, whose values are invented",
        example="structmap example -o try",
    )
    command.add_argument(
        "-o",
        "--output",
        type=Path,
        default=Path("structmap-example"),
        help="folder to write",
    )


def _add_match(commands: Any) -> None:
    command = _command(
        commands,
        "match",
        _run_match,
        summary="bring the numbering of values and coordinates together and show it",
        example="structmap match try/4cup.cif.gz try/invented_values.csv",
    )
    command.add_argument(
        "coordinates", type=Path, help="mmCIF or PDB file, gzipped or not"
    )
    command.add_argument(
        "values", type=Path, nargs="+", help="tables of values, joined by site"
    )
    command.add_argument("-o", "--output", type=Path, help="CSV file to write instead")
    command.add_argument("--settings", type=Path, help="TOML file of settings")
    _add_settings(command, _MATCH_SETTINGS)


def _add_contacts(commands: Any) -> None:
    command = _command(
        commands,
        "contacts",
        _run_contacts,
        summary="list the residue contacts over the crystal, with operators and shifts",
        example="structmap contacts try/4cup.cif.gz -o contacts.csv",
    )
    command.add_argument(
        "coordinates", type=Path, help="mmCIF or PDB file, gzipped or not"
    )
    command.add_argument(
        "-o", "--output", type=Path, required=True, help="CSV file to write"
    )
    command.add_argument("--settings", type=Path, help="TOML file of settings")
    _add_settings(command, _CONTACT_SETTINGS)


def _add_settings(command: Any, names: Sequence[str]) -> None:
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
            group.add_argument(option, type=_comma_parted, metavar="A,B,…", **say)
        elif name == "seed" or int in (kind, *get_args(kind)):
            group.add_argument(option, type=int, metavar="N", **say)
        elif kind is float:
            group.add_argument(option, type=float, metavar="X", **say)
        else:
            choices = get_args(kind) or None
            group.add_argument(
                option, choices=choices, metavar=None if choices else "TEXT", **say
            )


def _comma_parted(text: str) -> tuple[str, ...]:
    return tuple(part.strip() for part in text.split(",") if part.strip())


def _shown(value: Any) -> str:
    if isinstance(value, tuple):
        return ",".join(value) or "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return "none" if value in (None, "") else str(value)


class _ShowSettings(argparse.Action):
    """Print all settings and end, as ``--version`` does."""

    def __init__(self, option_strings: Sequence[str], **more: Any) -> None:
        more["nargs"] = 0
        super().__init__(option_strings, **more)

    def __call__(self, parser: argparse.ArgumentParser, *rest: Any) -> None:
        del rest
        print(settings_text(), end="")
        parser.exit()


def _settings_of(call: argparse.Namespace, **more: Any) -> Settings:
    """Return the settings of a call: file first, then options."""
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


# --- running --------------------------------------------------------------------------


def _run_analyse(call: argparse.Namespace) -> None:
    settings = _settings_of(call)
    _check_output(call.output, [call.coordinates, *call.values])
    from structmap.analysis import analyse

    with _Progress(quiet=call.quiet) as progress:
        result = analyse(call.coordinates, call.values, settings, progress=progress)
        progress("writing", 1.0)
        result.save(call.output)
    _say(call, result.summary(str(call.output / "page.html")))


def _run_example(call: argparse.Namespace) -> None:
    _check_output(call.output, [])
    from structmap.analysis import analyse_example

    with _Progress(quiet=call.quiet) as progress:
        result = analyse_example(call.output, progress=progress)
    _say(call, result.summary(str(call.output / "page.html")))


def _run_match(call: argparse.Namespace) -> None:
    settings = _settings_of(call)
    from structmap.analysis import match_numbering
    from structmap.files import write_file
    from structmap.tables import table_text

    table, notes = match_numbering(call.coordinates, call.values, settings)
    if call.output:
        write_file(call.output, table_text(table))
    elif not call.quiet:
        print(table_text(table), end="")
    if not call.quiet:
        print("\n".join(notes), file=sys.stderr)


def _run_contacts(call: argparse.Namespace) -> None:
    settings = _settings_of(call)
    from structmap.analysis import list_contacts
    from structmap.files import write_file
    from structmap.tables import table_text

    with _Progress(quiet=call.quiet) as progress:
        table, notes = list_contacts(call.coordinates, settings, progress=progress)
        write_file(call.output, table_text(table))
    _say(call, "\n".join(notes))


def _check_output(folder: Path, inputs: Sequence[Path]) -> None:
    """Refuse an output that is a file or an input before any work is done."""
    if folder.exists() and not folder.is_dir():
        raise FileProblemError(
            folder, "is a file, not a folder", "name another folder with -o"
        )
    for path in inputs:
        if folder.resolve() == path.resolve():
            raise FileProblemError(folder, "is an input", "name another folder with -o")


def _say(call: argparse.Namespace, text: str) -> None:
    if not call.quiet and text:
        print(text)


class _Progress:
    """Shows the step under way on a terminal, nothing elsewhere."""

    def __init__(self, *, quiet: bool) -> None:
        self.shown = sys.stderr.isatty() and not quiet
        self.width = 0

    def __enter__(self) -> "_Progress":
        return self

    def __exit__(self, *problem: object) -> None:
        if self.shown:
            sys.stderr.write("\r" + " " * self.width + "\r")
            sys.stderr.flush()

    def __call__(self, step: str, share: float) -> None:
        if self.shown:
            text = f"structmap: {step} {100 * share:3.0f} %"
            sys.stderr.write("\r" + text.ljust(self.width))
            sys.stderr.flush()
            self.width = len(text)


if __name__ == "__main__":
    sys.exit(main())
