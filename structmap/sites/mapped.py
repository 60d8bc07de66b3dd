"""Laying rows on residues as a mapping table of the user says."""

from collections.abc import Iterator, Sequence

import numpy as np

from structmap.sites.errors import DisagreeingResidueError, NoMatchError
from structmap.sites.families import Chain
from structmap.sites.offsets import NOWHERE, lay_at, names_in_play
from structmap.sites.placing import Context, Part, Placement
from structmap.values import NumberMapping

_Target = tuple[int, int, int]  # family, chain, position


def place_by_mapping(
    context: Context, parts: Sequence[Part], mapping: NumberMapping
) -> list[Placement]:
    """Lay measured residues where a mapping table says.

    Parameters
    ----------
    context : Context
        Table and coordinates.
    parts : sequence of Part
        Rows by the chain that they name.
    mapping : NumberMapping
        Says which number is which residue.

    Returns
    -------
    list of Placement
        One for each part and chain; residues that the mapping does not name, or lays on
        another chain, have position -1 there.

    Raises
    ------
    DisagreeingResidueError
        If the mapping names a residue that the coordinates lack.
    NoMatchError
        If it names no measured residue.
    """
    entries = {
        (str(chain), int(number), str(code)): n
        for n, (chain, number, code) in enumerate(
            zip(
                mapping.table_chain,
                mapping.table_number,
                mapping.table_ins_code,
                strict=True,
            )
        )
    }
    placements = [
        placement
        for part in parts
        for placement in _place_part(context, part, mapping, entries)
    ]
    if not placements:
        numbers = mapping.table_number
        present = f"{mapping.name} maps numbers {numbers.min()} to {numbers.max()}"
        measured = ", ".join(str(r.number) for r in parts[0].residues[:3]) + ", ..."
        raise NoMatchError(context.values, context.coordinates, measured, present)
    return placements


def _place_part(
    context: Context,
    part: Part,
    mapping: NumberMapping,
    entries: dict[tuple[str, int, str], int],
) -> Iterator[Placement]:
    targets: list[_Target | None] = []
    for residue in part.residues:
        key = residue.number, residue.ins_code
        entry = entries.get((part.chain, *key), entries.get(("", *key)))
        found = None if entry is None else _target(context, part, mapping, entry)
        targets.append(found)
    places = list(dict.fromkeys((t[0], t[1]) for t in targets if t is not None))
    for family, chain in places:
        position = np.array(
            [t[2] if t and t[:2] == (family, chain) else NOWHERE for t in targets]
        )
        there = context.families[family].chains[chain]
        names = names_in_play(part.residues, there)
        laying = lay_at(names, there, position)
        yield Placement(
            part=part, family=family, chain=chain, laying=laying, how="given"
        )


def _target(
    context: Context, part: Part, mapping: NumberMapping, entry: int
) -> _Target:
    """Return where an entry of the mapping leads."""
    named = str(mapping.auth_asym_id[entry]) or part.chain
    number, code = int(mapping.auth_seq_id[entry]), str(mapping.ins_code[entry])
    chains = context.chains()
    if named:
        by_author = [one for one in chains if one[2].auth_asym_id == named]
        chains = by_author or [one for one in chains if one[2].label_asym_id == named]
    for family, place, chain in chains:
        here = (
            (chain.number == number) & (chain.ins_code == code) & (chain.residue >= 0)
        )
        if here.any():
            return family, place, int(np.flatnonzero(here)[0])
    site = f"{named + '/' if named else ''}{number}{code}"
    nearest = _nearest([chain for _, _, chain in chains], number)
    line = int(mapping.line[entry])
    raise DisagreeingResidueError(
        mapping.name, line, site, context.coordinates, nearest
    )


def _nearest(chains: Sequence[Chain], number: int) -> str:
    """Return the residue with the nearest number, by chain, name and number."""
    near = [
        (
            abs(int(chain.number[at]) - number),
            f"{chain.label(int(at))} {chain.name[at]}",
        )
        for chain in chains
        for at in np.flatnonzero(chain.residue >= 0)
    ]
    return min(near)[1] if near else "none, the chain is not there"
