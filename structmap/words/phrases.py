"""Phrases on one motional unit: its members, what holds it together."""

import numpy as np

from structmap.lattice import SMALLEST_PIECE
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.structure import LIGAND_PART
from structmap.words.names import listing, number_in_words, site_name

NAMED_AT_MOST = 5


LEVEL = 0.05
# A score that no placement fails to reach is none: unlikeness takes what likeness
# earns.
NEVER_LESS = 0.995


def hint_phrase(unit: MotionalUnit) -> str:
    """Return why a tentative unit is no more than a hint.

    Parameters
    ----------
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        A phrase that follows the name of the unit.
    """
    chance = max(unit.p_any, unit.p_place)
    if unit.p_place >= NEVER_LESS:
        return "moves, but its residues are not alike within their errors: a hint"
    if not chance <= LEVEL:
        text = f"is a hint: chance alone makes groups as good (p\u00a0{chance:.2g})"
    else:
        share = f"{100 * unit.stability:.0f}\u00a0%"
        text = f"is a hint: with errors drawn anew {share} of it comes back"
    return text


def members_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return the members of a unit: all when few, else their number and a centre.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        ``S28 N31 with Y51 E53 of a neighbour`` or ``seven residues around L23``.
    """
    pieces = unit.lattice.pieces_without_lattice
    if len(unit.members) <= NAMED_AT_MOST:
        groups = [" ".join(site_name(record, s) for s in piece) for piece in pieces]
        return " with ".join(groups[:2]) + (
            " of a neighbour" if len(pieces) > 1 else ""
        )
    return (
        f"{number_in_words(len(unit.members))} {_noun(record, unit)} around "
        f"{site_name(record, _centre(record, unit))}"
    )


def _noun(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return what the members are: residues, atoms of ligands, or both."""
    kind = record.structure.kind_of_residue[record.sites.residue[unit.members]]
    of_ligand = kind == LIGAND_PART
    if not of_ligand.any():
        return "residues"
    return "sites of ligands" if of_ligand.all() else "sites"


def _centre(record: AnalysisRecord, unit: MotionalUnit) -> int:
    """Return the member with the largest membership times deviation."""
    row = np.searchsorted(record.measurements.site, unit.members)
    weight = np.nan_to_num(record.membership_probability[unit.members], nan=1.0)
    return int(
        unit.members[np.argmax(weight * np.abs(record.behaviour.deviation[row]))]
    )


def lattice_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return in words what holds a unit together.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        A phrase that follows the name of the unit.
    """
    verdict = unit.lattice.verdict
    if verdict == "internal":
        return "lies inside the molecule"
    if verdict == "interface":
        return f"bridges {bridged_chains(record, unit)} of the assembly"
    where = across_phrase(record, unit)
    if verdict == "lattice-joined":
        kept = len(unit.lattice.pieces_without_lattice[0])
        stay = "stay" if kept > 1 else "stays"
        return (
            f"is held together by {where}; {number_in_words(kept)} of its "
            f"{number_in_words(len(unit.members))} residues {stay} together without it"
        )
    kept = len(unit.lattice.pieces_without_lattice[0])
    if kept >= SMALLEST_PIECE:
        return (
            f"needs {where}; {number_in_words(kept)} of its "
            f"{number_in_words(len(unit.members))} residues stay together without it"
        )
    return (
        f"exists only across {where}, and no unit is left of it when the neighbours "
        "are taken away"
    )


def bridged_chains(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return the chains that a unit bridges.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        ``chains A and B``.
    """
    copies = np.isin(record.sites.copy_site, unit.members)
    names = record.structure.auth_asym_id[record.sites.copy_residue[copies]].tolist()
    chains = sorted(set(names))
    if len(chains) == 1:
        return f"chain {chains[0]} and its mates"
    return f"chains {listing(chains)}"


def across_phrase(record: AnalysisRecord, unit: MotionalUnit) -> str:
    """Return the crystal contacts that join a unit.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    str
        ``crystal contact II``.
    """
    numerals = joining_numerals(record, unit)
    noun = "crystal contact" if len(numerals) == 1 else "crystal contacts"
    return f"{noun} {listing(numerals)}"


def joining_numerals(record: AnalysisRecord, unit: MotionalUnit) -> tuple[str, ...]:
    """Return the numerals of the crystal contacts that join a unit.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    unit : MotionalUnit
        The motional unit.

    Returns
    -------
    tuple of str
        Roman numerals in rising order; empty when none is needed.
    """
    numbered = record.packing.numbered
    places = sorted(
        {int(numbered.of_contact[index]) for index in unit.lattice.contacts}
    )
    return tuple(
        numbered.crystal_contacts[place].numeral for place in places if place >= 0
    )
