"""What bringing the numbering of values and coordinates together hands on."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ChainMatch:
    """How rows of the table were laid on one chain of the coordinates.

    Attributes
    ----------
    auth_asym_id : str
        The chain of the coordinates.
    table_chain : str
        The chain that the table names; blank when it names none.
    offset : int
        What was added to the table's numbers.
    how : str
        ``given``, ``sequence`` (aligned by residue names), ``numbers`` (constant offset
        searched) or ``copy`` (a chain of the same sequence as a matched one).
    n_matched, n_named, n_agreeing : int
        Rows laid on a residue; those of them with a residue name; those that agree.
    """

    auth_asym_id: str
    table_chain: str
    offset: int
    how: str
    n_matched: int
    n_named: int
    n_agreeing: int


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Sites:
    """Measured sites and their copies in the coordinates.

    Sites stand in the order of the coordinates; rows without a residue come last.

    Attributes
    ----------
    name : ndarray of str, shape (n_sites,)
        Unique: chain, number, insertion code, and the atom where the table names one
        (``A/56A``, ``A/30/CD1``), numbered as in the coordinates; for a row without a
        residue the table's own.
    row : ndarray of int, shape (n_sites,)
        Row of the value table.
    residue : ndarray of int, shape (n_sites,)
        First copy: index of a residue of the structure, -1 for a row without one; a
        ligand, until `part_ligands` made the measured part of it a residue.
    atom : ndarray of str, shape (n_sites,)
        Atom that the values belong to; blank for the residue.
    copy_site, copy_residue : ndarray of int, shape (n_copies,)
        All copies, NCS copies included: ``copy_residue[k]`` is a copy of site
        ``copy_site[k]``; sorted by site, the first copy first.
    chains : tuple of ChainMatch
        The reconciliation, chain by chain.
    mismatches : tuple of str
        Rows whose residue name differs from the coordinates', one phrase each
        (``54: THR in the table, CYS in the coordinates``).
    unmatched : tuple of str
        Rows without a residue, one phrase each with the reason.
    notes : tuple of str
        What else was decided, one sentence each.
    """

    name: NDArray[Any]
    row: NDArray[np.int64]
    residue: NDArray[np.int64]
    atom: NDArray[Any]
    copy_site: NDArray[np.int64]
    copy_residue: NDArray[np.int64]
    chains: tuple[ChainMatch, ...]
    mismatches: tuple[str, ...]
    unmatched: tuple[str, ...]
    notes: tuple[str, ...]

    def __post_init__(self) -> None:
        n_sites = len(self.name)
        store_read_only(self, "name", np.str_, (n_sites,))
        store_read_only(self, "row", np.int64, (n_sites,))
        store_read_only(self, "residue", np.int64, (n_sites,))
        store_read_only(self, "atom", np.str_, (n_sites,))
        store_read_only(self, "copy_site", np.int64, (None,))
        store_read_only(self, "copy_residue", np.int64, (len(self.copy_site),))
