"""What each command does once its words are read."""

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path

from structmap.cli.options import settings_of
from structmap.errors import FileProblemError


def run_analyse(call: argparse.Namespace) -> None:
    """Run the main job.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    settings = settings_of(call)
    check_output(call.output, [call.coordinates, *call.values])
    from structmap.analysis import analyse

    with Progress(quiet=call.quiet) as progress:
        result = analyse(call.coordinates, call.values, settings, progress=progress)
        progress("writing", 1.0)
        result.save(call.output)
    say(call, result.summary(str(call.output / "page.html")))


def run_example(call: argparse.Namespace) -> None:
    """Run the main job on the built-in example.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    check_output(call.output, [])
    from structmap.analysis import analyse_example

    with Progress(quiet=call.quiet) as progress:
        result = analyse_example(call.output, progress=progress)
    say(call, result.summary(str(call.output / "page.html")))


def run_match(call: argparse.Namespace) -> None:
    """Show how the numbering was brought together.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    settings = settings_of(call)
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


def run_contacts(call: argparse.Namespace) -> None:
    """List the residue contacts.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    settings = settings_of(call)
    from structmap.contact_list import list_contacts
    from structmap.files import write_file
    from structmap.plain_table import table_text

    with Progress(quiet=call.quiet) as progress:
        table, notes = list_contacts(call.coordinates, settings, progress=progress)
        write_file(call.output, table_text(table))
    say(call, "\n".join(notes))


def run_one_process(call: argparse.Namespace) -> None:
    """Test whether one process explains groups of profiles.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    settings = settings_of(call)
    from structmap.analysis import judge_table
    from structmap.files import write_file
    from structmap.tables import table_text

    with Progress(quiet=call.quiet) as progress:
        progress("fitting", 0.1)
        table, notes = judge_table(call.values, settings)
        if call.output:
            write_file(call.output, table_text(table))
    if not call.output and not call.quiet:
        print(table_text(table), end="")
    if not call.quiet:
        print("\n".join(notes), file=sys.stderr if not call.output else sys.stdout)


def run_shifts(call: argparse.Namespace) -> None:
    """Turn shift lists into a table of perturbations.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    from structmap.analysis import ShiftChoices, perturb_shifts
    from structmap.files import write_file
    from structmap.tables import table_text

    choices = ShiftChoices(
        weights=call.weights,
        x=call.x,
        x_unit=call.x_unit,
        list_names=call.list_names,
    )
    table, notes = perturb_shifts([call.free, *call.bound], choices)
    write_file(call.output, table_text(table))
    say(call, "\n".join(notes))


def run_compare(call: argparse.Namespace) -> None:
    """Compare the analyses of several forms.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    """
    check_output(call.output, [])
    from structmap.analysis import compare_analyses

    with Progress(quiet=call.quiet) as progress:
        progress("comparing", 0.1)
        notes = compare_analyses([call.measured, *call.others], call.output)
    say(call, "\n".join(notes))


def check_output(folder: Path, inputs: Sequence[Path]) -> None:
    """Refuse an output that is a file or an input before any work is done.

    Parameters
    ----------
    folder : Path
        The folder.
    inputs : sequence of Path
        Input files.

    Raises
    ------
    FileProblemError
        If it cannot be the output.
    """
    if folder.exists() and not folder.is_dir():
        raise FileProblemError(
            folder, "is a file, not a folder", "name another folder with -o"
        )
    for path in inputs:
        if folder.resolve() == path.resolve():
            raise FileProblemError(folder, "is an input", "name another folder with -o")


def say(call: argparse.Namespace, text: str) -> None:
    """Print a text unless the call is quiet.

    Parameters
    ----------
    call : argparse.Namespace
        The words of the call.
    text : str
        What to say.
    """
    if not call.quiet and text:
        print(text)


class Progress:
    """Shows the step under way on a terminal, nothing elsewhere.

    Parameters
    ----------
    quiet : bool
        Show nothing there either.
    """

    def __init__(self, *, quiet: bool) -> None:
        self.shown = sys.stderr.isatty() and not quiet
        self.width = 0

    def __enter__(self) -> "Progress":
        return self

    def __exit__(self, *problem: object) -> None:
        if self.shown:
            sys.stderr.write("\r" + " " * self.width + "\r")
            sys.stderr.flush()

    def __call__(self, step: str, share: float) -> None:
        """Show a step and the share done."""
        if self.shown:
            text = f"structmap: {step} {100 * share:3.0f} %"
            sys.stderr.write("\r" + text.ljust(self.width))
            sys.stderr.flush()
            self.width = len(text)
