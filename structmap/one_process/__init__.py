"""Does one process explain a group of sites: models, fits, the test."""

from structmap.one_process.catalogue import MODELS, Conditions, make_model
from structmap.one_process.columns import Prepared, site_names
from structmap.one_process.engine import fit_each, fit_group
from structmap.one_process.families import at_conditions
from structmap.one_process.mixture import Mixture, find_mixture
from structmap.one_process.model import Model, Parameter
from structmap.one_process.phrases import (
    plain_words,
    prefix_of,
    show_interval,
    show_number,
)
from structmap.one_process.preparing import prepare_profiles, spinning_conditions
from structmap.one_process.profiles import (
    GroupFit,
    Profiles,
    find_flat_sites,
    make_profiles,
)
from structmap.one_process.reference import Reference
from structmap.one_process.sharing import OneProcess, TestOptions, judge_group
from structmap.one_process.tabular import (
    ONE_PROCESS_COLUMNS,
    analyse_table,
    groups_by_row,
    judge_groups,
    table_rows,
)
from structmap.one_process.whole import (
    WholeMolecule,
    describe_whole,
    whole_rows,
    whole_words,
)

__all__ = [
    "MODELS",
    "ONE_PROCESS_COLUMNS",
    "Conditions",
    "GroupFit",
    "Mixture",
    "Model",
    "OneProcess",
    "Parameter",
    "Prepared",
    "Profiles",
    "Reference",
    "TestOptions",
    "WholeMolecule",
    "analyse_table",
    "at_conditions",
    "describe_whole",
    "find_flat_sites",
    "find_mixture",
    "fit_each",
    "fit_group",
    "groups_by_row",
    "judge_group",
    "judge_groups",
    "make_model",
    "make_profiles",
    "plain_words",
    "prefix_of",
    "prepare_profiles",
    "show_interval",
    "show_number",
    "site_names",
    "spinning_conditions",
    "table_rows",
    "whole_rows",
    "whole_words",
]
