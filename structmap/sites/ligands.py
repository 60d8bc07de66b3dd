"""Rows of a value table that name a ligand or an atom of one."""

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from structmap.sites.families import Family
from structmap.sites.record import Sites
from structmap.structure import (
    LIGAND,
    LIGAND_PART,
    POLYMER,
    Structure,
    part_residues,
    residue_label,
)
from structmap.values import ValueTable

Place = tuple[int, str]
"""Number and insertion code."""


@dataclass(frozen=True, slots=True, kw_only=True)
class LigandRow:
    """A row that lies on a ligand.

    Attributes
    ----------
    atom : str
        As the coordinates spell it; blank for the whole ligand.
    residues : tuple of int
        The ligand residue and its copies in chains of the same sequence, without those
        that NCS operators make; empty when none can be told.
    reason : str
        Why none can be told.
    """

    atom: str
    residues: tuple[int, ...]
    reason: str = ""


def find_ligand_rows(
    structure: Structure,
    table: ValueTable,
    families: Sequence[Family],
    *,
    named_chains_only: bool = False,
) -> dict[int, LigandRow]:
    """Return the rows of a table that lie on ligands.

    A row does when it names the component of a ligand that has its number, or, without
    a component, an atom of a ligand whose number no polymer residue has. Numbers of
    ligands are taken as they stand. Without an atom a row needs the component.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    table : ValueTable
        The measured values.
    families : sequence of Family
        Chains of one sequence; those without rows of their own are copies.
    named_chains_only : bool
        Where a row names its chain, other chains are no copies.

    Returns
    -------
    dict of int to LigandRow
        By the row of the table.
    """
    search = _Search(structure, table, families)
    found: dict[int, LigandRow] = {}
    for row in range(len(table.auth_seq_id)):
        ligands = search.candidates(row)
        if ligands:
            found[row] = search.lay(row, ligands, named_chains_only=named_chains_only)
    return _without_empty(structure, found)


def _without_empty(
    structure: Structure, found: dict[int, LigandRow]
) -> dict[int, LigandRow]:
    """Take whole ligands back of which every atom has a row of its own."""
    named: dict[int, set[str]] = defaultdict(set)
    for one in found.values():
        for residue in one.residues if one.atom else ():
            named[residue].add(one.atom)
    full = {
        residue
        for residue, atoms in named.items()
        if set(structure.atom_name[structure.residue_of_atom == residue]) <= atoms
    }
    reason = "each of its atoms has a row of its own"
    return {
        row: LigandRow(atom="", residues=(), reason=reason)
        if not one.atom and full & set(one.residues)
        else one
        for row, one in found.items()
    }


class _Search:
    """Looks ligands up by number, component and atom."""

    def __init__(
        self, structure: Structure, table: ValueTable, families: Sequence[Family]
    ) -> None:
        self._structure, self._table = structure, table
        self._polymer, self._ligands = (
            _by_place(structure, kind) for kind in (POLYMER, LIGAND)
        )
        self._family = {
            chain.auth_asym_id: n
            for n, family in enumerate(families)
            for chain in family.chains
        }
        self._named = set(table.auth_asym_id.tolist()) - {""}
        self._atoms: dict[int, dict[str, str]] = {}

    def candidates(self, row: int) -> list[int]:
        """Return the ligands that a row may mean; none when it means a polymer."""
        table, structure = self._table, self._structure
        component, atom = str(table.comp_id[row]), str(table.atom[row])
        ligands = self._here(self._ligands, row) if component or atom else []
        polymer = self._here(self._polymer, row) if ligands else []
        if component:
            if any(structure.auth_comp_id[r] == component for r in polymer):
                return []
            return [r for r in ligands if structure.auth_comp_id[r] == component]
        return [r for r in ligands if self._spelled(r, atom)] if not polymer else []

    def _here(self, known: dict[Place, list[int]], row: int) -> list[int]:
        table, structure = self._table, self._structure
        chain = str(table.auth_asym_id[row])
        place = int(table.auth_seq_id[row]), str(table.ins_code[row])
        found = known.get(place, [])
        by_author = [r for r in found if chain in ("", structure.auth_asym_id[r])]
        return by_author or [r for r in found if structure.label_asym_id[r] == chain]

    def _spelled(self, residue: int, atom: str) -> str:
        """Return an atom of a residue as the coordinates spell it, blank for none."""
        if residue not in self._atoms:
            own = self._structure.residue_of_atom == residue
            names = np.unique(self._structure.atom_name[own]).tolist()
            self._atoms[residue] = {name.upper(): name for name in names}
        return self._atoms[residue].get(atom.upper(), "")

    def lay(
        self, row: int, ligands: list[int], *, named_chains_only: bool
    ) -> LigandRow:
        """Lay a row on one of the ligands that it may mean, and on its copies."""
        structure, given = self._structure, str(self._table.atom[row])
        chains = [str(structure.auth_asym_id[r]) for r in ligands]
        alike = {
            (self._family.get(c, c), structure.auth_comp_id[r])
            for c, r in zip(chains, ligands, strict=True)
        }
        if len(alike) > 1:
            where = ", ".join(_full_name(structure, r) for r in ligands)
            reason = f"may be any of {where}; name chain and component"
            return LigandRow(atom=given, residues=(), reason=reason)
        first = ligands[0]
        atom = self._spelled(first, given)
        if given and not atom:
            reason = f"{_full_name(structure, first)} has no heavy atom of that name"
            return LigandRow(atom=given, residues=(), reason=reason)
        copies: list[int] = []
        if not (named_chains_only and self._table.auth_asym_id[row]):
            copies = [r for r in self._copies(first) if self._spelled(r, atom) == atom]
        return LigandRow(atom=atom, residues=(first, *copies))

    def _copies(self, ligand: int) -> list[int]:
        """Return the same ligand of chains that are copies, one a chain.

        It is the one of the same number, or the only one where both chains have one.
        """
        structure = self._structure
        chain = str(structure.auth_asym_id[ligand])
        component = structure.auth_comp_id[ligand]
        like: dict[str, list[int]] = defaultdict(list)
        for residues in self._ligands.values():
            for residue in residues:
                if structure.auth_comp_id[residue] == component:
                    like[str(structure.auth_asym_id[residue])].append(residue)
        found = []
        for other in sorted(set(like) - {chain} - self._named):
            if self._family.get(other, other) != self._family.get(chain, chain):
                continue
            same = [
                r
                for r in like[other]
                if _place(structure, r) == _place(structure, ligand)
            ]
            alone = len(like[other]) == len(like[chain]) == 1
            found += same[:1] or (like[other] if alone else [])
        return sorted(found)


def _place(structure: Structure, residue: int) -> Place:
    return int(structure.auth_seq_id[residue]), str(structure.ins_code[residue])


def _by_place(structure: Structure, kind: int) -> dict[Place, list[int]]:
    """Return the residues of a kind by number, without those made by NCS operators."""
    own = structure.original_residue == np.arange(len(structure.kind_of_residue))
    found: dict[Place, list[int]] = defaultdict(list)
    for residue in np.flatnonzero(own & (structure.kind_of_residue == kind)).tolist():
        found[_place(structure, residue)].append(residue)
    return found


def _full_name(structure: Structure, residue: int) -> str:
    return f"{structure.auth_comp_id[residue]} {residue_label(structure, residue)}"


def say_ligands(structure: Structure, rows: Sequence[LigandRow]) -> list[str]:
    """Say which ligands were measured.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    rows : sequence of LigandRow
        Rows on ligands.

    Returns
    -------
    list of str
        One sentence for atoms, one for whole ligands.
    """
    laid = [row for row in rows if row.residues]
    notes = []
    for of_atoms, what in (
        (True, "the atoms that the table names are sites of their own"),
        (False, "each as a whole is one site"),
    ):
        some = [row.residues[0] for row in laid if bool(row.atom) == of_atoms]
        names = [_full_name(structure, r) for r in sorted(set(some))]
        if names:
            noun = "Ligand" if len(names) == 1 else "Ligands"
            notes.append(f"{noun} {', '.join(names)}: {what} ({len(some)}).")
    return notes


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class PartedSites:
    """Sites of which each lies on a residue that contacts are found for.

    Attributes
    ----------
    structure : Structure
        With the measured parts of ligands as residues of their own.
    sites : Sites
        On the residues of that structure.
    """

    structure: Structure
    sites: Sites


def part_ligands(structure: Structure, sites: Sites) -> PartedSites:
    """Make each measured atom of a ligand a residue of its own.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    sites : Sites
        Of that structure.

    Returns
    -------
    PartedSites
        The same ones where no ligand was measured.
    """
    kind = structure.kind_of_residue
    pairs = list(
        zip(
            sites.copy_residue.tolist(),
            sites.atom[sites.copy_site].tolist(),
            strict=True,
        )
    )
    parts = sorted({pair for pair in pairs if kind[pair[0]] == LIGAND})
    if not parts:
        return PartedSites(structure=structure, sites=sites)
    parted = part_residues(structure, parts)
    first = int(np.flatnonzero(parted.kind_of_residue == LIGAND_PART)[0])
    place = {part: first + k for k, part in enumerate(parts)}
    copy_residue = np.array([place.get(pair, pair[0]) for pair in pairs])
    residue = sites.residue.copy()
    start = np.flatnonzero(np.diff(sites.copy_site, prepend=-1))
    residue[sites.copy_site[start]] = copy_residue[start]
    return PartedSites(
        structure=parted,
        sites=replace(sites, residue=residue, copy_residue=copy_residue),
    )
