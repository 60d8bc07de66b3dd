"""Residue entries of the models of a file, and the atoms that belong to them."""

from dataclasses import dataclass

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.errors import RepeatedResidueError, UnplacedAtomError
from structmap.structure.files import ParsedFile
from structmap.structure.record import LIGAND, POLYMER, WATER

LARGEST_COORDINATE_ANGSTROM = 9000.0
LARGEST_RESIDUE_ANGSTROM = 12.0
HYDROGENS = (1, 119)  # gemmi numbers deuterium beyond the periodic table


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Entry:
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

    @property
    def key(self) -> tuple[str | int, ...]:
        """What tells it from all other entries.

        Returns
        -------
        tuple
            Names of the chain, number, insertion code; for ligands the name too.
        """
        name = "" if self.kind == POLYMER else self.auth_comp_id
        return (*self.chain, self.auth_seq_id, self.ins_code, name)


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
    used = {model.num for model in models}
    index_of_key: dict[tuple[str | int, ...], int] = {}
    entries: list[Entry] = []
    entry_of_atom, model_of_atom = [], []
    for rank, model in enumerate(
        model for model in parsed.content if model.num in used
    ):
        found, counts = _walk(parsed, model)
        indices = []
        for entry in found:
            if entry.key not in index_of_key:
                index_of_key[entry.key] = len(entries)
                entries.append(entry)
            indices.append(index_of_key[entry.key])
        entry_of_atom.append(np.repeat(np.array(indices, dtype=np.int64), counts))
        model_of_atom.append(np.full(sum(counts), rank, dtype=np.int64))
    table = _atom_table(
        parsed.content,
        used,
        np.concatenate(entry_of_atom),
        np.concatenate(model_of_atom),
    )
    _check_positions(parsed, entries, table)
    entries, table = _in_order(entries, table)
    _check_merged(parsed, entries, table)
    return entries, table


def _walk(parsed: ParsedFile, model: gemmi.Model) -> tuple[list[Entry], list[int]]:
    found, counts, seen = [], [], set()
    for chain in model:
        previous = None
        for residue in chain:
            entry = _entry(chain.name, residue)
            if entry.kind == POLYMER and entry.key != previous:
                if entry.key in seen:
                    label = f"{chain.name}/{residue.seqid}"
                    raise RepeatedResidueError(parsed.path, label)
                seen.add(entry.key)
            previous = entry.key
            found.append(entry)
            counts.append(len(residue))
    return found, counts


def _entry(chain_name: str, residue: gemmi.Residue) -> Entry:
    if residue.entity_type == gemmi.EntityType.Polymer:
        kind = POLYMER
    else:
        kind = WATER if residue.is_water() else LIGAND
    number = residue.seqid.num
    return Entry(
        kind=kind,
        auth_asym_id=chain_name,
        label_asym_id=residue.subchain,
        auth_comp_id=residue.name,
        ins_code=residue.seqid.icode.strip(),
        auth_seq_id=0 if number is None else number,
        label_seq_id=-1 if residue.label_seq is None else residue.label_seq,
    )


def _atom_table(
    content: gemmi.Structure,
    used: set[int],
    entry: NDArray[np.int64],
    model: NDArray[np.int64],
) -> AtomTable:
    flat = gemmi.FlatStructure(content)
    of_used = np.isin(flat.model_num, list(used))
    hydrogen = np.isin(flat.elements, HYDROGENS)
    keep = np.flatnonzero(of_used & ~hydrogen & (flat.occ > 0))
    rank = np.cumsum(of_used) - 1
    names = np.asarray(flat.atom_names)[keep]
    elements = np.asarray(flat.element_names)[keep]
    letters = np.ascontiguousarray(np.asarray(flat.altlocs)[keep]).view("S1")
    return AtomTable(
        entry=entry[rank[keep]],
        model=model[rank[keep]],
        position=flat.pos[keep],
        name=np.ascontiguousarray(names).view("S8")[:, 0].astype(np.str_),
        element=elements.astype(np.str_),
        altloc=np.char.strip(letters.astype(np.str_)),
        occupancy=flat.occ[keep].astype(np.float64),
        b_iso=flat.b_iso[keep].astype(np.float64),
    )


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
    for entry in entries:
        chains.setdefault(entry.chain, len(chains))
    has_atoms = np.zeros(len(entries), dtype=np.bool_)
    has_atoms[table.entry] = True
    order = sorted(
        np.flatnonzero(has_atoms).tolist(),
        key=lambda index: (entries[index].kind, chains[entries[index].chain], index),
    )
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
