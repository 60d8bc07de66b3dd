"""Measured sites with all their copies in the coordinates."""

import difflib
from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from structmap.sites.errors import RepeatedSiteError, UnknownSiteError
from structmap.sites.families import Chain, find_families
from structmap.sites.ligands import LigandRow, find_ligand_rows, say_ligands
from structmap.sites.mapped import place_by_mapping
from structmap.sites.placing import (
    Context,
    Part,
    Placement,
    disagreements,
    no_match,
    place_parts,
    split_parts,
)
from structmap.sites.record import ChainMatch, Sites
from structmap.sites.residue_names import names_agree
from structmap.structure import Structure, residue_label
from structmap.values import NumberMapping, ValueTable


@dataclass(slots=True)
class _Site:
    """A row while its copies are gathered."""

    row: int
    atom: str
    label: str
    reason: str
    copies: list[int] = field(default_factory=list)


def match_sites(
    structure: Structure,
    table: ValueTable,
    *,
    offset: int | None = None,
    mapping: NumberMapping | None = None,
    named_chains_only: bool = False,
    exclude: Sequence[str] = (),
) -> Sites:
    """Bring the numbering of a value table and of the coordinates together.

    Rows that name a chain are laid on that chain, the others on the chain that they
    fit. Where residues are named, the measured sequence is aligned with the chain's
    full sequence; else constant offsets within 200 are tried: when an offset avoids
    proline so well that it is no accident (amide data), the one with fewest values on
    proline, then the one with most rows inside the full sequence, offset 0 if it is
    among the best. Chains of the same sequence without rows of their own are copies.

    Rows that name a ligand, or an atom of one, lie on that residue, by its number as it
    stands; `part_ligands` then makes each of them a residue of its own.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    table : ValueTable
        The measured values.
    offset : int or None
        Number to add to the table's numbers; overrides the search.
    mapping : NumberMapping or None
        Says residue by residue; overrides the search and `offset`.
    named_chains_only : bool
        Where the table names chains, others of the same sequence are no copies.
    exclude : sequence of str
        Sites to leave out, written as in the coordinates: ``A/56A`` or ``56A``, with
        the atom where the table names one (``A/30/CD1``).

    Returns
    -------
    Sites
        Sites, their copies, and how the numbering was reconciled.

    Raises
    ------
    UnknownChainError
        If the table names a chain that the coordinates lack.
    NoMatchError
        If no row finds a residue.
    UnclearMatchError
        If two answers are equally good.
    DisagreeingNamesError
        If more than a tenth of the named residues disagree, unless `offset` or
        `mapping` is given.
    DisagreeingResidueError
        If the mapping names a residue that the coordinates lack.
    RepeatedSiteError
        If two rows fall on one residue (and atom).
    UnknownSiteError
        If a site to leave out is not among the measured ones.
    """
    context = Context(table, find_families(structure), structure.name)
    ligands = find_ligand_rows(
        structure, table, context.families, named_chains_only=named_chains_only
    )
    parts, notes = split_parts(table, ligands), list[str]()
    placements: list[Placement] = []
    if parts and mapping is not None:
        placements = place_by_mapping(context, parts, mapping)
    elif parts:
        placements, notes = place_parts(context, parts, offset=offset)
    found, chains = _gather(structure, context, parts, placements, named_chains_only)
    found = _with_ligands(structure, context, found, ligands)
    _refuse_repeated(structure, context, found)
    mismatches = [text for one in placements for text in disagreements(context, one)]
    notes += _say_copies(chains) + _say_uneven(context, placements)
    notes += say_ligands(structure, list(ligands.values()))
    kept = _without_excluded(structure, found, exclude)
    if len(kept) < len(found):
        left = sorted({site.label for site in found} - {site.label for site in kept})
        notes.append(f"Left out as asked: {', '.join(left)}.")
    return _as_record(kept, chains, tuple(mismatches), tuple(notes))


def _gather(
    structure: Structure,
    context: Context,
    parts: Sequence[Part],
    placements: Sequence[Placement],
    named_only: bool,  # noqa: FBT001 - private
) -> tuple[list[_Site], list[ChainMatch]]:
    """Return every row with its copies, and how each chain was matched."""
    ncs_copies = _ncs_copies(structure)
    chains = _targets(context, placements, named_chains_only=named_only)
    sites = {
        row: _new_site(context.table, part, row) for part in parts for row in part.rows
    }
    for placement, targets in zip(placements, chains, strict=True):
        for row, at in _laid_rows(placement):
            own = [int(c.residue[at]) for c in targets if c.residue[at] >= 0]
            sites[row].copies = [r for one in own for r in (one, *ncs_copies[one])]
            named = targets[0].auth_asym_id
            sites[row].reason = f"in the sequence of chain {named}, without coordinates"
    if parts and not any(site.copies for site in sites.values()):
        raise no_match(context, parts)
    for site in sites.values():
        if site.copies:
            site.label = residue_label(structure, site.copies[0])
            site.label += f"/{site.atom}" if site.atom else ""
    matches = [
        _chain_match(context, placement, chain, n)
        for placement, targets in zip(placements, chains, strict=True)
        for n, chain in enumerate(targets)
    ]
    return [sites[row] for row in sorted(sites)], matches


def _with_ligands(
    structure: Structure,
    context: Context,
    found: Sequence[_Site],
    ligands: dict[int, LigandRow],
) -> list[_Site]:
    """Return the sites with those on ligands, in the order of the table."""
    table, ncs_copies = context.table, _ncs_copies(structure)
    sites = {site.row: site for site in found}
    for row, one in ligands.items():
        copies = [r for own in one.residues for r in (own, *ncs_copies[own])]
        chain = str(table.auth_asym_id[row])
        number = f"{table.auth_seq_id[row]}{table.ins_code[row]}"
        label = residue_label(structure, copies[0]) if copies else ""
        label = label or "/".join(filter(None, (chain, number)))
        label = f"{label}/{one.atom}" if one.atom else label
        sites[row] = _Site(row, one.atom, label, one.reason, copies)
    return [sites[row] for row in sorted(sites)]


def _laid_rows(placement: Placement) -> Iterator[tuple[int, int]]:
    """Yield each row that has a position, and the position."""
    part, position = placement.part, placement.laying.position
    for row, residue in zip(part.rows, part.residue_of_row, strict=True):
        if position[residue] >= 0:
            yield row, int(position[residue])


def _new_site(table: ValueTable, part: Part, row: int) -> _Site:
    chain, atom = str(table.auth_asym_id[row]), str(table.atom[row])
    number = f"{table.auth_seq_id[row]}{table.ins_code[row]}"
    label = "/".join(text for text in (chain, number, atom) if text)
    where = f"chain {part.chain}" if part.chain else "the coordinates"
    return _Site(row, atom, label, f"no residue of {where} has that number")


def _ncs_copies(structure: Structure) -> dict[int, list[int]]:
    """Return the NCS copies of each residue that has any."""
    copies: dict[int, list[int]] = defaultdict(list)
    original = structure.original_residue
    for residue in np.flatnonzero(original != np.arange(len(original))).tolist():
        copies[int(original[residue])].append(residue)
    return copies


def _targets(
    context: Context, placements: Sequence[Placement], *, named_chains_only: bool
) -> list[list[Chain]]:
    """Return for each placement its chain and the chains that are copies of it."""
    owned = {(one.family, one.chain) for one in placements}
    targets: list[list[Chain]] = []
    served: set[int] = set()
    for one in placements:
        chains = context.families[one.family].chains
        copies: list[Chain] = []
        if one.family not in served and not (named_chains_only and one.part.chain):
            copies = [c for n, c in enumerate(chains) if (one.family, n) not in owned]
        served.add(one.family)
        targets.append([chains[one.chain], *copies])
    return targets


def _chain_match(
    context: Context, placement: Placement, chain: Chain, n_before: int
) -> ChainMatch:
    """Count what was laid on a chain; on a copy, by its own residues."""
    laid = [(row, at) for row, at in _laid_rows(placement) if chain.residue[at] >= 0]
    table = context.table
    steps = [int(chain.number[at] - table.auth_seq_id[row]) for row, at in laid]
    agree = [
        names_agree(str(table.comp_id[row]), str(chain.name[at])) for row, at in laid
    ]
    return ChainMatch(
        auth_asym_id=chain.auth_asym_id,
        table_chain=placement.part.chain,
        offset=max(sorted(set(steps)), key=steps.count)
        if n_before and steps
        else placement.laying.offset,
        how="copy" if n_before else placement.how,
        n_matched=len(laid),
        n_named=sum(one is not None for one in agree),
        n_agreeing=sum(one is True for one in agree),
    )


def _say_copies(chains: Sequence[ChainMatch]) -> list[str]:
    copies = [chain.auth_asym_id for chain in chains if chain.how == "copy"]
    if not copies:
        return []
    noun = "is a copy" if len(copies) == 1 else "are copies"
    chain = "Chain" if len(copies) == 1 else "Chains"
    return [f"{chain} {', '.join(copies)} {noun} of a measured chain: same sequence."]


def _say_uneven(context: Context, placements: Sequence[Placement]) -> list[str]:
    """Say where an alignment has several offsets along a chain."""
    notes: list[str] = []
    for one in placements:
        if one.laying.is_constant or one.how == "given":
            continue
        chain = context.families[one.family].chains[one.chain]
        laid = np.flatnonzero(one.laying.position >= 0)
        number = np.array([one.part.residues[n].number for n in laid])
        step = chain.number[one.laying.position[laid]] - number
        order = np.argsort(number, kind="stable")
        cuts = np.flatnonzero(np.diff(step[order])) + 1
        runs = [
            f"{number[run[0]]} to {number[run[-1]]}: {step[run[0]]:+d}"
            for run in np.split(order, cuts)
        ]
        notes.append(
            f"Chain {chain.auth_asym_id} was aligned by residue names; its offset "
            f"varies ({', '.join(runs[:8])}{', ...' * (len(runs) > 8)})."
        )
    return notes


def _refuse_repeated(
    structure: Structure, context: Context, found: Sequence[_Site]
) -> None:
    seen: dict[tuple[int, str], int] = {}
    for site in found:
        if not site.copies:
            continue
        first = seen.setdefault((site.copies[0], site.atom), site.row)
        if first != site.row:
            lines = int(context.table.line[first]), int(context.table.line[site.row])
            name = residue_label(structure, site.copies[0])
            raise RepeatedSiteError(context.values, lines, name)


def _without_excluded(
    structure: Structure, found: Sequence[_Site], exclude: Sequence[str]
) -> list[_Site]:
    names = [_names_of(structure, site) for site in found]
    for wanted in exclude:
        if not any(wanted in known for known in names):
            every = sorted({site.label for site in found})
            nearest = difflib.get_close_matches(wanted, every, n=1, cutoff=0.0)
            raise UnknownSiteError(wanted, nearest[0])
    wanted_names = set(exclude)
    return [
        s for s, known in zip(found, names, strict=True) if not known & wanted_names
    ]


def _names_of(structure: Structure, site: _Site) -> set[str]:
    """Return every way to write a site: any copy, with or without chain and atom."""
    labels = {site.label, *(residue_label(structure, r) for r in site.copies)}
    bare = {label.split("/", 1)[1] for label in labels if site.copies and "/" in label}
    names = labels | bare
    return names | {f"{name}/{site.atom}" for name in names if site.atom}


def _as_record(
    kept: Sequence[_Site],
    chains: Sequence[ChainMatch],
    mismatches: tuple[str, ...],
    notes: tuple[str, ...],
) -> Sites:
    matched = [site for site in kept if site.copies]
    matched.sort(key=lambda site: (site.copies[0], site.atom, site.row))
    unmatched = [site for site in kept if not site.copies]
    taken = {site.label for site in matched}
    for site in unmatched:
        if site.label in taken:  # the table's own number of it is another residue's
            site.label += " (table)"
    ordered = [*matched, *unmatched]
    counts = [len(site.copies) for site in ordered]
    return Sites(
        name=np.array([site.label for site in ordered], dtype=np.str_),
        row=np.array([site.row for site in ordered], dtype=np.int64),
        residue=np.array([(*site.copies, -1)[0] for site in ordered], dtype=np.int64),
        atom=np.array([site.atom for site in ordered], dtype=np.str_),
        copy_site=np.repeat(np.arange(len(ordered)), counts),
        copy_residue=np.array([r for site in ordered for r in site.copies], np.int64),
        chains=tuple(chains),
        mismatches=mismatches,
        unmatched=tuple(f"{site.label}: {site.reason}" for site in unmatched),
        notes=notes,
    )
