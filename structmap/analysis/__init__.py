"""The main entry: coordinates and values in, a result out."""

from structmap.analysis.compute import analyse_table
from structmap.analysis.handle import Analysis, analyse, analyse_example, example_folder
from structmap.analysis.jobs import list_contacts, match_notes, match_numbering

__all__ = [
    "Analysis",
    "analyse",
    "analyse_example",
    "analyse_table",
    "example_folder",
    "list_contacts",
    "match_notes",
    "match_numbering",
]
