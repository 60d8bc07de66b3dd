"""The command line: one command a job, one line an error."""

from structmap.cli.entry import main

__all__ = ["main"]
