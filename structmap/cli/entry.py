"""The commands and their words."""

import argparse
import sys
import textwrap
from collections.abc import Sequence
from dataclasses import fields
from pathlib import Path
from typing import Any

from structmap.cli.options import (
    ShowSettings,
    add_settings,
    comma_parted,
    listed_numbers,
    weights_by_nucleus,
)
from structmap.cli.running import (
    run_analyse,
    run_compare,
    run_contacts,
    run_example,
    run_match,
    run_one_process,
    run_shifts,
)
from structmap.errors import StructmapError
from structmap.settings import Settings
from structmap.version import __version__

DONE, UNUSABLE, WRONG_CALL, STOPPED = 0, 1, 2, 130
_CONTACT_SETTINGS = (
    "cutoff_angstrom",
    "ca_cutoff_angstrom",
    "assembly",
    "coordinate_model",
)
_MATCH_SETTINGS = (
    *("offset", "mapping", "named_chains_only", "exclude", "columns"),
    "coordinate_model",
)
_PROCESS_SETTINGS = (
    *("model", "mas_rate_hertz", "proton_frequency_megahertz", "sample", "quantity"),
    *("nucleus", "homonuclear", "lowest_field_hertz", "largest_offset_hertz"),
    *("protein_molar", "errors_trusted", "process_quantity", "keep_points"),
    *("columns", "seed"),
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
        return STOPPED
    return DONE


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
    _add_one_process(commands)
    _add_shifts(commands)
    _add_compare(commands)
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
        run_analyse,
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
        action=ShowSettings,
        help="print all settings as TOML and stop",
    )
    add_settings(command, [field.name for field in fields(Settings)])


def _add_example(commands: Any) -> None:
    command = _command(
        commands,
        "example",
        run_example,
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
        run_match,
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
    add_settings(command, _MATCH_SETTINGS)


def _add_contacts(commands: Any) -> None:
    command = _command(
        commands,
        "contacts",
        run_contacts,
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
    add_settings(command, _CONTACT_SETTINGS)


def _add_one_process(commands: Any) -> None:
    command = _command(
        commands,
        "one-process",
        run_one_process,
        summary="test whether one value of a process explains whole groups of profiles",
        example="structmap one-process try/invented_values.csv --model mas-r1rho \\\n"
        "    --mas-rate-hertz 60000 --sample deuterated -o one_process.csv",
    )
    command.add_argument(
        "values",
        type=Path,
        nargs="+",
        help="tables of profiles; a column group parts them",
    )
    command.add_argument("-o", "--output", type=Path, help="CSV file to write")
    command.add_argument("--settings", type=Path, help="TOML file of settings")
    add_settings(command, _PROCESS_SETTINGS)


def _add_shifts(commands: Any) -> None:
    command = _command(
        commands,
        "shifts",
        run_shifts,
        summary="turn two or more shift lists into a perturbation of each residue",
        example="structmap shifts free.str bound.str -o perturbation.csv\n"
        "structmap shifts free.csv half.csv full.csv --x 0,50,100 --x-unit uM \\\n"
        "    -o titration.csv\n"
        "structmap one-process titration.csv --model binding",
    )
    command.add_argument("free", type=Path, help="shift list to start from")
    command.add_argument(
        "bound", type=Path, nargs="+", help="lists to compare, in order"
    )
    command.add_argument(
        "-o", "--output", type=Path, required=True, help="table that analyse reads"
    )
    command.add_argument(
        "--weights",
        type=weights_by_nucleus,
        default={},
        metavar="H=1,N=0.14",
        help="nuclei that enter and their weights [H=1,N=0.14, 0.20 in glycine]",
    )
    command.add_argument(
        "--x",
        type=listed_numbers,
        default=(),
        metavar="0,50,…",
        help="total ligand of each list: writes the titration, a row a point",
    )
    command.add_argument(
        "--x-unit", default="", metavar="uM", help="unit of x: M, mM, uM, nM, …"
    )
    command.add_argument(
        "--list",
        dest="list_names",
        type=comma_parted,
        default=(),
        metavar="NAME,NAME",
        help="shift list of each file that holds several: its save frame or number",
    )


def _add_compare(commands: Any) -> None:
    command = _command(
        commands,
        "compare",
        run_compare,
        summary="hold the units of one analysis against other forms of the protein",
        example="structmap compare measured_form other_form -o forms",
    )
    command.add_argument(
        "measured", type=Path, help="folder of the form that was measured"
    )
    command.add_argument("others", type=Path, nargs="+", help="folders of other forms")
    command.add_argument(
        "-o", "--output", type=Path, required=True, help="folder to write"
    )
