"""What reading measured values hands on."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Quantity:
    """One measured quantity over all rows of a table.

    Attributes
    ----------
    name : str
        As in the table, without its unit (``R1rho``).
    unit : str
        Unit of measurement as written in the table; blank when not stated.
    x : ndarray of float, shape (n_points,)
        Where a profile was measured, rising; empty for one number a site.
    x_name, x_unit : str
        What x is; blank for one number a site.
    value, error : ndarray of float, shape (n_rows, n_points)
        One column for one number a site. NaN where missing; an error that is not
        given (blank or 0) is NaN.
    has_errors : bool
        Whether the table has an error for at least one value of it.
    base : str
        Name without the conditions; blank where the table states none.
    mas_rate_hertz, proton_frequency_megahertz : float
        Conditions that columns of the table state; 0 where they state none.
    """

    name: str
    unit: str
    x: NDArray[np.float64]
    x_name: str
    x_unit: str
    value: NDArray[np.float64]
    error: NDArray[np.float64]
    has_errors: bool
    base: str = ""
    mas_rate_hertz: float = 0.0
    proton_frequency_megahertz: float = 0.0

    def __post_init__(self) -> None:
        n_points = max(1, len(self.x))
        store_read_only(self, "x", np.float64, (None,))
        store_read_only(self, "value", np.float64, (None, n_points))
        store_read_only(self, "error", np.float64, self.value.shape)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ValueTable:
    """Measured values, a row a measured site.

    Attributes
    ----------
    names : tuple of str
        Names of the files without folders.
    sha256 : tuple of str
        SHA-256 of their bytes.
    auth_asym_id, ins_code, comp_id, atom, group : ndarray of str, shape (n_rows,)
        Blank where the table says nothing. ``comp_id`` is upper case, of one or three
        letters as in the table.
    auth_seq_id : ndarray of int, shape (n_rows,)
        Numbers as in the table.
    line : ndarray of int, shape (n_rows,)
        Line (row of a sheet) where the site first stands, the header being line 1.
    quantities : tuple of Quantity
    notes : tuple of str
        What was recognised or mended on reading, one sentence each (separator, decimal
        comma, errors of 0).
    """

    names: tuple[str, ...]
    sha256: tuple[str, ...]
    auth_asym_id: NDArray[Any]
    auth_seq_id: NDArray[np.int64]
    ins_code: NDArray[Any]
    comp_id: NDArray[Any]
    atom: NDArray[Any]
    group: NDArray[Any]
    line: NDArray[np.int64]
    quantities: tuple[Quantity, ...]
    notes: tuple[str, ...]

    def __post_init__(self) -> None:
        n_rows = len(self.auth_seq_id)
        for name in ("auth_asym_id", "ins_code", "comp_id", "atom", "group"):
            store_read_only(self, name, np.str_, (n_rows,))
        for name in ("auth_seq_id", "line"):
            store_read_only(self, name, np.int64, (n_rows,))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class NumberMapping:
    """Which number of a value table belongs to which residue of the coordinates.

    Attributes
    ----------
    name : str
        Name of the file without its folder.
    sha256 : str
        SHA-256 of its bytes.
    table_chain, table_ins_code : ndarray of str, shape (n_entries,)
        As in the value table; a blank chain stands for every chain of the table.
    table_number : ndarray of int, shape (n_entries,)
        Number in the value table.
    auth_asym_id, ins_code : ndarray of str, shape (n_entries,)
        In the coordinates; a blank chain stands for the chain that the table names, or
        for the first one that has the residue.
    auth_seq_id : ndarray of int, shape (n_entries,)
        Number in the coordinates.
    line : ndarray of int, shape (n_entries,)
        Line of the file.
    """

    name: str
    sha256: str
    table_chain: NDArray[Any]
    table_number: NDArray[np.int64]
    table_ins_code: NDArray[Any]
    auth_asym_id: NDArray[Any]
    auth_seq_id: NDArray[np.int64]
    ins_code: NDArray[Any]
    line: NDArray[np.int64]

    def __post_init__(self) -> None:
        n_entries = len(self.table_number)
        for name in ("table_chain", "table_ins_code", "auth_asym_id", "ins_code"):
            store_read_only(self, name, np.str_, (n_entries,))
        for name in ("table_number", "auth_seq_id", "line"):
            store_read_only(self, name, np.int64, (n_entries,))
