"""Shift lists: perturbation between them, lost and doubled peaks, populations."""

from structmap.shifts.changes import Threshold, combine_changes, find_threshold
from structmap.shifts.comparison import (
    ShiftComparison,
    compare_shifts,
    perturbation_rows,
    perturbation_table,
)
from structmap.shifts.conformers import (
    DoubledPeaks,
    FastExchange,
    Pairing,
    Populations,
    find_doubled_peaks,
    find_fast_population,
    find_populations,
    pair_with_states,
)
from structmap.shifts.lists import pick_list, profile_rows

__all__ = [
    "DoubledPeaks",
    "FastExchange",
    "Pairing",
    "Populations",
    "ShiftComparison",
    "Threshold",
    "combine_changes",
    "compare_shifts",
    "find_doubled_peaks",
    "find_fast_population",
    "find_populations",
    "find_threshold",
    "pair_with_states",
    "perturbation_rows",
    "perturbation_table",
    "pick_list",
    "profile_rows",
]
