"""Laying residues and atoms out as arrays, with the copies that NCS operators make."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.structure.entries import AtomTable, Entry
from structmap.structure.record import POLYMER


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Layout:
    """Which entry and which NCS copy each residue of the structure is.

    Attributes
    ----------
    entry, ncs : ndarray of int, shape (n_residues,)
        Polymer residues first, copy by copy; then ligands, then waters.
    """

    entry: NDArray[np.int64]
    ncs: NDArray[np.int64]


def make_layout(entries: Sequence[Entry], n_ncs: int) -> Layout:
    """Return the order of residues.

    Parameters
    ----------
    entries : sequence of Entry
        Sorted by kind.
    n_ncs : int
        Copies of everything, the original included.

    Returns
    -------
    Layout
        Entry and copy of each residue.
    """
    kind = np.tile([entry.kind for entry in entries], n_ncs)
    entry_index = np.tile(np.arange(len(entries)), n_ncs)
    ncs = np.repeat(np.arange(n_ncs), len(entries))
    order = np.lexsort((entry_index, ncs, kind))
    return Layout(entry=entry_index[order], ncs=ncs[order])


def residue_columns(
    entries: Sequence[Entry], layout: Layout
) -> dict[str, NDArray[Any]]:
    """Return the columns of the residues.

    Parameters
    ----------
    entries : sequence of Entry
        Residues of the file, without NCS copies.
    layout : Layout
        Order of the residues.

    Returns
    -------
    dict of ndarray, shape (n_residues,)
        By the names they have in `Structure`.
    """
    columns: dict[str, NDArray[Any]] = {
        "kind_of_residue": np.array([entry.kind for entry in entries]),
        "auth_asym_id": np.array([entry.auth_asym_id for entry in entries]),
        "label_asym_id": np.array([entry.label_asym_id for entry in entries]),
        "auth_comp_id": np.array([entry.auth_comp_id for entry in entries]),
        "ins_code": np.array([entry.ins_code for entry in entries]),
        "auth_seq_id": np.array([entry.auth_seq_id for entry in entries]),
        "label_seq_id": np.array([entry.label_seq_id for entry in entries]),
    }
    columns = {name: column[layout.entry] for name, column in columns.items()}
    columns["copy_of_residue"] = _copy_of_residue(entries, layout)
    columns["original_residue"] = _residue_of(layout)[0, layout.entry]
    return columns


def _copy_of_residue(entries: Sequence[Entry], layout: Layout) -> NDArray[np.int64]:
    chains: dict[tuple[str, str], int] = {}
    rank = np.array(
        [
            chains.setdefault(entry.chain, len(chains)) if entry.kind == POLYMER else -1
            for entry in entries
        ]
    )
    copy = rank[layout.entry] + len(chains) * layout.ncs
    return np.where(rank[layout.entry] < 0, -1, copy)


def _residue_of(layout: Layout) -> NDArray[np.int64]:
    residue = np.empty((layout.ncs.max() + 1, layout.entry.max() + 1), dtype=np.int64)
    residue[layout.ncs, layout.entry] = np.arange(len(layout.entry))
    return residue


def atom_columns(
    atoms: AtomTable, layout: Layout, ncs: Sequence[NDArray[np.float64]]
) -> dict[str, NDArray[Any]]:
    """Return the columns of the atoms.

    Parameters
    ----------
    atoms : AtomTable
        Atoms of the file, without NCS copies.
    layout : Layout
        Order of the residues.
    ncs : sequence of ndarray, shape (4, 4)
        The identity first.

    Returns
    -------
    dict of ndarray, shape (n_atoms, ...)
        By the names they have in `Structure`, sorted by model, then by residue.
    """
    residue = _residue_of(layout)[:, atoms.entry].ravel()
    position = np.concatenate(
        [atoms.position @ matrix[:3, :3].T + matrix[:3, 3] for matrix in ncs]
    )
    model = np.tile(atoms.model, len(ncs))
    order = np.lexsort((residue, model))
    source = order % len(atoms.entry)
    return {
        "position": position[order],
        "residue_of_atom": residue[order],
        "model_of_atom": model[order],
        "atom_name": atoms.name[source],
        "element": atoms.element[source],
        "altloc": atoms.altloc[source],
        "occupancy": atoms.occupancy[source],
        "b_iso": atoms.b_iso[source],
    }
