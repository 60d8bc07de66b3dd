"""Laying the rows of a value table on chains of the coordinates."""

from collections.abc import Container, Sequence
from dataclasses import dataclass

import numpy as np

from structmap.sites.errors import (
    DisagreeingNamesError,
    NoMatchError,
    UnclearMatchError,
    UnknownChainError,
)
from structmap.sites.families import Chain, Family
from structmap.sites.offsets import (
    Laying,
    MeasuredResidue,
    avoid_prolines,
    full_enough,
    lay_by_names,
    lay_by_numbers,
    lay_by_offset,
    name_rank,
    names_decide,
    number_rank,
)
from structmap.sites.residue_names import names_agree
from structmap.values import ValueTable

_LARGEST_SHARE_DISAGREEING = 0.1


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Part:
    """Rows of a table that name one chain, or none.

    Attributes
    ----------
    chain : str
        As the table names it; blank when it names none.
    rows : tuple of int
    residues : tuple of MeasuredResidue
        Each once, in the order of the table.
    residue_of_row : tuple of int
        Index into `residues` for each of `rows`.
    """

    chain: str
    rows: tuple[int, ...]
    residues: tuple[MeasuredResidue, ...]
    residue_of_row: tuple[int, ...]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Placement:
    """A part of the table laid on a chain.

    Attributes
    ----------
    part : Part
    family, chain : int
        Index of the family, and of the chain in it.
    laying : Laying
    how : str
        ``given``, ``sequence`` or ``numbers``.
    """

    part: Part
    family: int
    chain: int
    laying: Laying
    how: str


@dataclass(frozen=True, slots=True)
class Context:
    """What a search for the numbering looks at.

    Attributes
    ----------
    table : ValueTable
    families : tuple of Family
    coordinates : str
        Name of the coordinate file.
    """

    table: ValueTable
    families: tuple[Family, ...]
    coordinates: str

    @property
    def values(self) -> str:
        """Return the names of the value files, for messages.

        Returns
        -------
        str
            Parted by commas.
        """
        return ", ".join(self.table.names)

    def chains(self) -> list[tuple[int, int, Chain]]:
        """Return all chains with the indices of family and chain.

        Returns
        -------
        list of tuple
            Family, chain in it, and the chain.
        """
        return [
            (f, c, chain)
            for f, family in enumerate(self.families)
            for c, chain in enumerate(family.chains)
        ]


def split_parts(table: ValueTable, without: Container[int] = frozenset()) -> list[Part]:
    """Return the rows of a table by the chain that they name.

    Parameters
    ----------
    table : ValueTable
        The measured values.
    without : container of int
        Rows that no chain of the polymer is sought for.

    Returns
    -------
    list of Part
        Named chains in the order of the table, rows without a chain last.
    """
    names = list(dict.fromkeys(table.auth_asym_id.tolist()))
    names.sort(key=lambda name: name == "")
    parts: list[Part] = []
    for name in names:
        every = np.flatnonzero(table.auth_asym_id == name).tolist()
        rows = [row for row in every if row not in without]
        if not rows:
            continue
        residues: dict[tuple[int, str], MeasuredResidue] = {}
        for row in rows:
            key = int(table.auth_seq_id[row]), str(table.ins_code[row])
            called = str(table.comp_id[row])
            known = residues.setdefault(key, MeasuredResidue(*key, called))
            if called and not known.name:
                residues[key] = MeasuredResidue(*key, called)
        index = {key: n for n, key in enumerate(residues)}
        parts.append(
            Part(
                chain=name,
                rows=tuple(rows),
                residues=tuple(residues.values()),
                residue_of_row=tuple(
                    index[int(table.auth_seq_id[row]), str(table.ins_code[row])]
                    for row in rows
                ),
            )
        )
    return parts


def place_parts(
    context: Context, parts: Sequence[Part], *, offset: int | None
) -> tuple[list[Placement], list[str]]:
    """Lay each part of a table on a chain.

    Parameters
    ----------
    context : Context
        Table and coordinates.
    parts : sequence of Part
        Rows by the chain that they name.
    offset : int or None
        Stated by the user; None looks for it.

    Returns
    -------
    placements : list of Placement
        One for each part that finds a residue.
    notes : list of str
        What was decided, one sentence each.

    Raises
    ------
    UnknownChainError
        If the table names a chain that the coordinates lack.
    NoMatchError
        If nothing fits.
    UnclearMatchError
        If two answers are equally good.
    DisagreeingNamesError
        If more than a tenth of the named residues disagree.
    """
    placements: list[Placement] = []
    notes: list[str] = []
    targets = {part.chain: named_chains(context, part) for part in parts if part.chain}
    taken = {(f, c) for chains in targets.values() for f, c, _ in chains}
    for part in parts:
        free = [one for one in context.chains() if one[:2] not in taken]
        chains = targets[part.chain] if part.chain else free
        if offset is not None:
            found = _place_given(context, part, chains, offset)
        elif names_decide(part.residues):
            found = _place_by_names(context, part, chains)
        else:
            found = _place_by_numbers(context, part, chains, notes)
        if found is not None:
            placements.append(found)
    if not placements:
        raise no_match(context, parts)
    if offset is None:
        _refuse_disagreement(context, placements)
    return placements, notes


def named_chains(context: Context, part: Part) -> list[tuple[int, int, Chain]]:
    """Return the chains that a part of a table names, by author's, then label name.

    Parameters
    ----------
    context : Context
        Table and coordinates.
    part : Part
        Rows that name one chain, or none.

    Returns
    -------
    list of tuple
        Family, chain in it, and the chain.

    Raises
    ------
    UnknownChainError
        If there is none.
    """
    chains = context.chains()
    by_author = [one for one in chains if one[2].auth_asym_id == part.chain]
    found = by_author or [one for one in chains if one[2].label_asym_id == part.chain]
    if not found:
        names = sorted({chain.auth_asym_id for _, _, chain in chains})
        present = ("chains " if len(names) > 1 else "chain ") + ", ".join(names)
        line = int(context.table.line[part.rows[0]])
        raise UnknownChainError(
            context.values, line, part.chain, context.coordinates, present
        )
    return found


_Candidate = tuple[tuple[int, ...], Placement]


def _place_given(
    context: Context, part: Part, chains: list[tuple[int, int, Chain]], offset: int
) -> Placement | None:
    candidates = [
        _candidate(part, f, c, lay_by_offset(part.residues, chain, offset), "given")
        for f, c, chain in chains
    ]
    ranked = [(name_rank(found.laying), found) for found in candidates]
    return _choose(context, ranked)


def _place_by_names(
    context: Context, part: Part, chains: list[tuple[int, int, Chain]]
) -> Placement | None:
    ranked = [
        (name_rank(laying), _candidate(part, f, c, laying, "sequence"))
        for f, c, chain in chains
        for laying in lay_by_names(part.residues, chain)
    ]
    return _choose(context, ranked)


def _place_by_numbers(
    context: Context,
    part: Part,
    chains: list[tuple[int, int, Chain]],
    notes: list[str],
) -> Placement | None:
    layings = {(f, c): lay_by_numbers(part.residues, chain) for f, c, chain in chains}
    most = max((n.n_inside for found in layings.values() for n in found), default=0)
    fullest = [
        (f, c, chain)
        for f, c, chain in chains
        if any(laying.n_inside == most for laying in layings[f, c])
    ]
    amide = any(avoid_prolines(layings[f, c], chain) for f, c, chain in fullest if most)
    ranked = [
        (number_rank(laying, amide=amide), _candidate(part, f, c, laying, "numbers"))
        for f, c, _ in (fullest if amide else chains)
        for laying in (full_enough(layings[f, c]) if amide else layings[f, c])
    ]
    stands = _stands_as_numbered(context, part, layings) if part.chain else None
    if stands is not None:
        _say_what_prolines_say(context, ranked, notes, amide=amide)
        return stands
    found = _choose(context, ranked)
    if found is not None and found.laying.offset:
        notes.append(_reason(found, amide=amide))
    return found


def _candidate(
    part: Part, family: int, chain: int, laying: Laying, how: str
) -> Placement:
    return Placement(part=part, family=family, chain=chain, laying=laying, how=how)


def _stands_as_numbered(
    context: Context, part: Part, layings: dict[tuple[int, int], list[Laying]]
) -> Placement | None:
    """Return offset 0 when a named chain has coordinates for every row as it stands.

    A table that names chain and residues of the file, all of them there, speaks the
    numbering of the file, whatever the values are on.
    """
    for (f, c), found in layings.items():
        zero = [laying for laying in found if laying.offset == 0]
        if zero and zero[0].n_inside == len(part.residues):
            chains = context.families[f].chains
            seen = np.any([chain.residue >= 0 for chain in chains], axis=0)
            if seen[zero[0].position].all():
                return _candidate(part, f, c, zero[0], "numbers")
    return None


def _say_what_prolines_say(
    context: Context, ranked: list[_Candidate], notes: list[str], *, amide: bool
) -> None:
    best = min(ranked, key=lambda one: one[0])[1]
    if amide and best.laying.offset:
        chain = context.families[best.family].chains[best.chain].auth_asym_id
        notes.append(
            f"Every row of chain {chain} has its number in the coordinates, so offset "
            f"0 was kept; if these are amide data, {best.laying.offset:+d} would "
            "put fewer values on proline (--offset states it)."
        )


def _reason(found: Placement, *, amide: bool) -> str:
    """Return why an offset other than 0 was taken."""
    laying, n_residues = found.laying, len(found.part.residues)
    offset = f"Offset {laying.offset:+d} was taken: it lays {laying.n_inside} of "
    offset += f"{n_residues} measured residues inside the full sequence"
    if amide or laying.n_proline == 0:
        on = f"{laying.n_proline} of them" if laying.n_proline else "none"
        return f"{offset} and {on} on proline."
    return f"{offset}, more than any other."


def _choose(context: Context, ranked: list[_Candidate]) -> Placement | None:
    """Return the best candidate; refuse when another answer is as good."""
    inside = [one for one in ranked if one[1].laying.n_inside]
    if not inside:
        return None
    inside.sort(key=lambda one: (one[0], one[1].family, one[1].chain))
    best_rank, best = inside[0]
    rivals = [
        one for rank, one in inside if rank == best_rank and not _same_answer(one, best)
    ]
    if rivals:
        raise _unclear(context, best, rivals)
    return best


def _same_answer(one: Placement, other: Placement) -> bool:
    """Return whether two placements lay every row on the same residue of a molecule.

    Chains of one family are copies.
    """
    same = one.family == other.family
    return same and np.array_equal(one.laying.position, other.laying.position)


def _unclear(
    context: Context, best: Placement, rivals: list[Placement]
) -> UnclearMatchError:
    """Return the refusal, with what the user can do about it."""
    answers = [best, *rivals]
    families = {one.family for one in answers}
    named = [
        f"chain {context.families[one.family].chains[one.chain].auth_asym_id}"
        f" at offset {one.laying.offset:+d}"
        for one in answers
    ]
    shown = " and ".join(named[:3]) + (" and more" if len(named) > 3 else "")
    if len(families) > 1:
        remedy = "name the chain of each row in a column auth_asym_id"
    else:
        remedy = "state one with --offset, or add the residue names as auth_comp_id"
    return UnclearMatchError(context.values, context.coordinates, shown, remedy)


def no_match(context: Context, parts: Sequence[Part]) -> NoMatchError:
    """Return the refusal of a table of which no row finds a residue.

    Parameters
    ----------
    context : Context
        Table and coordinates.
    parts : sequence of Part
        Rows by the chain that they name.

    Returns
    -------
    NoMatchError
        To be raised.
    """
    numbers = [residue.number for part in parts for residue in part.residues]
    chain = parts[0].chain if len(parts) == 1 else ""
    measured = (
        f"{'chain ' + chain + ' ' if chain else ''}{min(numbers)} to {max(numbers)}"
    )
    present = [
        f"chain {one.auth_asym_id} {one.number[seen].min()} to {one.number[seen].max()}"
        for _, _, one in context.chains()
        if (seen := one.residue >= 0).any()
    ]
    more = ", ..." if len(present) > 4 else ""
    return NoMatchError(
        context.values,
        context.coordinates,
        measured,
        (", ".join(present[:4]) + more) or "no polymer residues",
    )


def disagreements(context: Context, placement: Placement) -> list[str]:
    """Return the measured residues whose names differ from the coordinates'.

    Parameters
    ----------
    context : Context
        Table and coordinates.
    placement : Placement
        A part laid on a chain.

    Returns
    -------
    list of str
        One phrase each.
    """
    chain = context.families[placement.family].chains[placement.chain]
    prefix = f"{placement.part.chain}/" if placement.part.chain else ""
    phrases: list[str] = []
    for residue, position in zip(
        placement.part.residues, placement.laying.position.tolist(), strict=True
    ):
        there = str(chain.name[position]) if position >= 0 else ""
        if names_agree(residue.name, there) is False:
            named = f"{prefix}{residue.number}{residue.ins_code}"
            phrases.append(
                f"{named}: {residue.name} in the table, {there} in the coordinates"
            )
    return phrases


def _refuse_disagreement(context: Context, placements: Sequence[Placement]) -> None:
    n_named = sum(placement.laying.n_named for placement in placements)
    examples = [phrase for one in placements for phrase in disagreements(context, one)]
    if len(examples) > _LARGEST_SHARE_DISAGREEING * n_named:
        raise DisagreeingNamesError(
            context.values, context.coordinates, n_named, tuple(examples)
        )
