"""Residue entries of the models of a file, and the atoms that belong to them."""

from dataclasses import dataclass
from typing import Any, NamedTuple

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.errors import RepeatedResidueError, UnplacedAtomError
from structmap.structure.files import ParsedFile
from structmap.structure.record import LIGAND, POLYMER, WATER

LARGEST_COORDINATE_ANGSTROM = 9000.0
LARGEST_RESIDUE_ANGSTROM = 12.0
HYDROGENS = (1, 119)  # gemmi numbers deuterium beyond the periodic table
NO_NUMBER = -999  # what gemmi writes for a residue without one

Key = tuple[str | int, ...]


class Entry(NamedTuple):
    """One residue of the file; two alternative residues at one place are one entry.

    Attributes
    ----------
    kind : int
        ``POLYMER``, ``LIGAND`` or ``WATER``.
    auth_asym_id, label_asym_id, auth_comp_id, ins_code : str
    auth_seq_id, label_seq_id : int
    """

    kind: int
    auth_asym_id: str
    label_asym_id: str
    auth_comp_id: str
    ins_code: str
    auth_seq_id: int
    label_seq_id: int

    @property
    def chain(self) -> tuple[str, str]:
        """Author and label name of its chain.

        Returns
        -------
        tuple of str
            Both names.
        """
        return self.auth_asym_id, self.label_asym_id


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class AtomTable:
    """Atoms that are kept, of all used models, without NCS copies.

    Attributes
    ----------
    entry, model : ndarray of int, shape (n_atoms,)
        Index of the entry and rank of the model.
    position : ndarray of float, shape (n_atoms, 3)
        In Å.
    name, element, altloc : ndarray of str, shape (n_atoms,)
    occupancy, b_iso : ndarray of float, shape (n_atoms,)
    """

    entry: NDArray[np.int64]
    model: NDArray[np.int64]
    position: NDArray[np.float64]
    name: NDArray[np.str_]
    element: NDArray[np.str_]
    altloc: NDArray[np.str_]
    occupancy: NDArray[np.float64]
    b_iso: NDArray[np.float64]


def collect_entries(
    parsed: ParsedFile, models: list[gemmi.Model]
) -> tuple[list[Entry], AtomTable]:
    """Return the residue entries of some models and their atoms.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    models : list of gemmi.Model
        Models of that file.

    Returns
    -------
    entries : list of Entry
        Polymer residues first, then ligands, then waters, each in the order of the
        file; only those with an atom that is kept.
    atoms : AtomTable
        Sorted by model, then by entry. Hydrogens, deuterium and atoms of zero
        occupancy are left out.

    Raises
    ------
    RepeatedResidueError
        If a polymer residue id comes back elsewhere in its chain.
    UnplacedAtomError
        If a kept atom has no position.
    """
    numbers = [model.num for model in models]
    flat = gemmi.FlatStructure(parsed.content)
    index_of_key: dict[Key, int] = {}
    entries: list[Entry] = []
    entry_of_atom, model_of_atom = [], []
    for rank, model in enumerate(m for m in parsed.content if m.num in numbers):
        found, counts = _walk(parsed, model, flat)
        indices = []
        for key, entry in found:
            index = index_of_key.setdefault(key, len(entries))
            if index == len(entries):
                entries.append(entry)
            indices.append(index)
        entry_of_atom.append(np.repeat(np.array(indices, dtype=np.int64), counts))
        model_of_atom.append(np.full(counts.sum(), rank, dtype=np.int64))
    table = _atom_table(
        flat,
        np.isin(flat.model_num, numbers),
        np.concatenate(entry_of_atom),
        np.concatenate(model_of_atom),
    )
    _check_positions(parsed, entries, table)
    entries, table = _in_order(entries, table)
    _check_merged(parsed, entries, table)
    return entries, table


def _walk(
    parsed: ParsedFile, model: gemmi.Model, flat: gemmi.FlatStructure
) -> tuple[list[tuple[Key, Entry]], NDArray[np.int64]]:
    """Return the residues of a model that hold atoms, and how many these are.

    With each stands what tells it from all others: names of the chain, number,
    insertion code; for ligands the name too.
    """
    residues = [residue for chain in model for residue in chain if len(residue)]
    counts = np.array([len(residue) for residue in residues], dtype=np.int64)
    first = int(np.argmax(flat.model_num == model.num)) + np.cumsum(counts) - counts
    polymer = (flat.entity_type[first] == gemmi.EntityType.Polymer.value).tolist()
    number = np.where(flat.resnums[first] == NO_NUMBER, 0, flat.resnums[first])
    names = [residue.name for residue in residues]
    place = (
        [c.name for c in model for residue in c if len(residue)],
        [residue.subchain for residue in residues],
    )
    numbers = number.tolist(), [chr(code).strip() for code in flat.icodes[first]]
    own = ["" if is_own else n for is_own, n in zip(polymer, names, strict=True)]
    kinds = [
        POLYMER if is_own else (WATER if residue.is_water() else LIGAND)
        for is_own, residue in zip(polymer, residues, strict=True)
    ]
    labels = [-1 if n is None else n for n in [r.label_seq for r in residues]]
    keys: list[Key] = list(zip(*place, *numbers, own, strict=True))
    columns = (kinds, *place, names, numbers[1], numbers[0], labels)
    found = list(zip(keys, map(Entry, *columns), strict=True))
    _refuse_repeated(parsed, found)
    return found, counts


def _refuse_repeated(parsed: ParsedFile, found: list[tuple[Key, Entry]]) -> None:
    seen: set[Key] = set()
    previous: Key | None = None
    for key, entry in found:
        if entry.kind == POLYMER and key != previous:
            if key in seen:
                number = f"{entry.auth_seq_id}{entry.ins_code}"
                label = f"{entry.auth_asym_id}/{number}"
                raise RepeatedResidueError(parsed.path, label)
            seen.add(key)
        previous = key


def _atom_table(
    flat: gemmi.FlatStructure,
    of_used: NDArray[np.bool_],
    entry: NDArray[np.int64],
    model: NDArray[np.int64],
) -> AtomTable:
    hydrogen = np.isin(flat.elements, HYDROGENS)
    keep = np.flatnonzero(of_used & ~hydrogen & (flat.occ > 0))
    rank = np.cumsum(of_used) - 1
    return AtomTable(
        entry=entry[rank[keep]],
        model=model[rank[keep]],
        position=flat.pos[keep],
        name=_text(flat.atom_names, keep),
        element=_text(flat.element_names, keep),
        altloc=_text(flat.altlocs, keep),
        occupancy=flat.occ[keep].astype(np.float64),
        b_iso=flat.b_iso[keep].astype(np.float64),
    )


def _text(column: Any, keep: NDArray[np.int64]) -> NDArray[np.str_]:
    """Return some rows of bytes padded with zeros or blanks as text."""
    codes = np.ascontiguousarray(np.asarray(column)[keep])
    codes = codes.view(np.uint8).reshape(len(keep), -1)
    points = np.where(codes == ord(" "), 0, codes).astype(np.uint32)
    return points.view(f"U{points.shape[1]}")[:, 0]


def _check_positions(
    parsed: ParsedFile, entries: list[Entry], table: AtomTable
) -> None:
    size = np.abs(table.position).max(axis=1, initial=0.0)
    refused = np.flatnonzero(~(size < LARGEST_COORDINATE_ANGSTROM))
    if refused.size:
        entry = entries[table.entry[refused[0]]]
        number = f"{entry.auth_seq_id}{entry.ins_code}"
        atom = f"{entry.auth_asym_id}/{number}/{table.name[refused[0]]}"
        raise UnplacedAtomError(parsed.path, atom)


def _check_merged(parsed: ParsedFile, entries: list[Entry], table: AtomTable) -> None:
    """Refuse two chains without names, whose residues fall into one another."""
    start = np.flatnonzero(np.diff(table.entry, prepend=-1))
    ends = np.append(start[1:], len(table.entry))
    low = np.minimum.reduceat(table.position, start, axis=0)
    high = np.maximum.reduceat(table.position, start, axis=0)
    for index in np.flatnonzero((high - low).max(axis=1) > LARGEST_RESIDUE_ANGSTROM):
        entry = entries[table.entry[start[index]]]
        own = slice(start[index], ends[index])
        atoms = list(zip(table.name[own], table.altloc[own], strict=True))
        if entry.kind == POLYMER and len(set(atoms)) < len(atoms):
            label = f"{entry.auth_asym_id}/{entry.auth_seq_id}{entry.ins_code}"
            raise RepeatedResidueError(parsed.path, label)


def _in_order(entries: list[Entry], table: AtomTable) -> tuple[list[Entry], AtomTable]:
    chains: dict[tuple[str, str], int] = {}
    chain = np.array([chains.setdefault(e.chain, len(chains)) for e in entries])
    kind = np.array([entry.kind for entry in entries])
    has_atoms = np.zeros(len(entries), dtype=np.bool_)
    has_atoms[table.entry] = True
    order = np.flatnonzero(has_atoms)
    order = order[np.lexsort((order, chain[order], kind[order]))]
    new_index = np.full(len(entries), -1)
    new_index[order] = np.arange(len(order))
    entry_of_atom = new_index[table.entry]
    by_model = np.lexsort((entry_of_atom, table.model))
    return [entries[index] for index in order], AtomTable(
        entry=entry_of_atom[by_model],
        model=table.model[by_model],
        position=table.position[by_model],
        name=table.name[by_model],
        element=table.element[by_model],
        altloc=table.altloc[by_model],
        occupancy=table.occupancy[by_model],
        b_iso=table.b_iso[by_model],
    )
