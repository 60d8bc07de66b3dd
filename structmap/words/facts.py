"""The facts beside the title."""

from collections.abc import Sequence

import numpy as np

from structmap.result import AnalysisRecord
from structmap.words.direction import low_quantities
from structmap.words.head import grouped_quantities
from structmap.words.names import measured_chains, number_in_words
from structmap.words.packing import packing_facts

NAMED_AT_MOST = 3


def facts(record: AnalysisRecord) -> tuple[tuple[str, tuple[str, ...]], ...]:
    """Return the facts beside the title: label and lines.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of (str, tuple of str)
        Coordinates, Values, Numbering, Errors.
    """
    return (
        ("Coordinates", _coordinate_lines(record)),
        ("Values", _value_lines(record)),
        ("Numbering", _numbering_lines(record)),
        ("Errors", (_errors_line(record),)),
    )


def _coordinate_lines(record: AnalysisRecord) -> tuple[str, ...]:
    structure = record.structure
    chains = measured_chains(record)
    noun = "chain" if len(chains) == 1 else "chains"
    first = f"{structure.name}, {noun} {' '.join(chains)}"
    if not np.isnan(structure.resolution_angstrom):
        first += f", {structure.resolution_angstrom:.2f}\u00a0Å"
    if structure.crystal is None:
        models = structure.n_models
        return (first, "no crystal" + (f", {models} models" if models > 1 else ""))
    group = f"{structure.crystal.space_group}, {_neighbours(record)}"
    return (first, group, *packing_facts(record))


def _neighbours(record: AnalysisRecord) -> str:
    numbered = record.packing.numbered
    count = len(numbered.crystal_contacts)
    noun = "crystal contact" if count == 1 else "crystal contacts"
    return f"{number_in_words(count)} {noun}"


def _value_lines(record: AnalysisRecord) -> tuple[str, ...]:
    files = _some(record.table.names, "files")
    if not record.measurements.is_profile:
        low = low_quantities(record)
        direction = (f"low means moving: {_some(low, 'quantities')}",) if low else ()
        return (files, _some(grouped_quantities(record), "quantities"), *direction)
    quantity = next(
        q for q in record.table.quantities if q.name in grouped_quantities(record)
    )
    spread = f"{quantity.x[0]:g}–{quantity.x[-1]:g} {quantity.x_unit}".rstrip()
    if record.settings.mas_rate_hertz:
        spread += f", spinning at {record.settings.mas_rate_hertz / 1000:g}\u00a0kHz"
    return (f"{files}, {len(quantity.x)} points", spread)


def _some(names: Sequence[str], noun: str) -> str:
    """Return few names in full, of many the first and how many there are."""
    if len(names) <= NAMED_AT_MOST:
        return ", ".join(names)
    return f"{names[0]} and {number_in_words(len(names) - 1)} more {noun}"


def _numbering_lines(record: AnalysisRecord) -> tuple[str, ...]:
    lines = []
    for chain in record.sites.chains:
        text = f"{chain.auth_asym_id}: offset {chain.offset:d}".replace("-", "−")
        if chain.n_named:
            text += f", {chain.n_agreeing} of {chain.n_named} names agree"
        else:
            text += f", {chain.n_matched} matched"
        lines.append(text)
    if len(lines) > 2:
        lines = [lines[0], f"and {number_in_words(len(lines) - 1)} more chains"]
    return tuple(lines)


def _errors_line(record: AnalysisRecord) -> str:
    if record.measurements.errors_given:
        return f"given with the values, scale {record.behaviour.error_scale:.2f}"
    return "not given, estimated from the scatter"
