"""The main entry: coordinates and values in, a result out."""

from structmap.analysis.compute import analyse_table
from structmap.analysis.handle import Analysis, analyse, analyse_example, example_folder
from structmap.analysis.jobs import (
    ShiftChoices,
    compare_analyses,
    judge_table,
    match_notes,
    match_numbering,
    perturb_shifts,
)
from structmap.contact_list import list_contacts

__all__ = [
    "Analysis",
    "ShiftChoices",
    "analyse",
    "analyse_example",
    "analyse_table",
    "compare_analyses",
    "example_folder",
    "judge_table",
    "list_contacts",
    "match_notes",
    "match_numbering",
    "perturb_shifts",
]
