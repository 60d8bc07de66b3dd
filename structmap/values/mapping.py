"""A table that says which measured number is which residue of the coordinates."""

from dataclasses import replace
from pathlib import Path

import numpy as np

from structmap.errors import FileProblemError
from structmap.values.errors import RepeatedRowError, UnclearColumnsError
from structmap.values.files import read_grid
from structmap.values.grid import Grid, read_source
from structmap.values.headers import find_column
from structmap.values.records import NumberMapping
from structmap.values.residues import ResidueNumber, parse_residue

_TABLE_NUMBER = ("table_seq_id", "from")
_TABLE_CHAIN = ("table_asym_id", "table_chain")
_TABLE_CODE = ("table_ins_code",)
_NUMBER = ("auth_seq_id", "to")
_CHAIN = ("auth_asym_id", "chain")
_CODE = ("pdbx_pdb_ins_code", "ins_code")


def read_mapping(path: Path | str) -> NumberMapping:
    """Read a table that lays measured numbers on residues of the coordinates.

    Columns ``table_seq_id`` (with ``table_asym_id`` and ``table_ins_code`` where
    needed) for the value table, ``auth_seq_id`` (with ``auth_asym_id`` and
    ``pdbx_PDB_ins_code``) for the coordinates, as the table of `match` has them; or
    just ``from`` and ``to`` with chain, number and code written together (``A/56A``).

    Parameters
    ----------
    path : Path or str
        CSV, TSV or other text, Excel or Parquet.

    Returns
    -------
    NumberMapping
        An entry for each row that leads to a residue.

    Raises
    ------
    FileProblemError
        If the file is missing, empty or no table.
    NoSiteColumnError
        If no column gives the number in the coordinates.
    UnclearColumnsError
        If no column gives the number in the value table.
    UnreadableCellError
        If a cell is no residue number.
    RepeatedRowError
        If two rows lay the same measured residue.
    """
    source = read_source(Path(path))
    grid = _without_blank_targets(read_grid(source, (), keys=_NUMBER))
    before = _residues(grid, _TABLE_NUMBER, _TABLE_CHAIN, _TABLE_CODE)
    after = _residues(grid, _NUMBER, _CHAIN, _CODE)
    seen: dict[ResidueNumber, int] = {}
    for residue, line in zip(before, grid.lines, strict=True):
        first = seen.setdefault(residue, line)
        if first != line:
            named = f"number {residue.number}{residue.ins_code} of the value table"
            raise RepeatedRowError(grid.path, (first, line), named)
    return NumberMapping(
        name=source.path.name,
        sha256=source.sha256,
        table_chain=np.array([residue.chain for residue in before], dtype=np.str_),
        table_number=np.array([residue.number for residue in before]),
        table_ins_code=np.array(
            [residue.ins_code for residue in before], dtype=np.str_
        ),
        auth_asym_id=np.array([residue.chain for residue in after], dtype=np.str_),
        auth_seq_id=np.array([residue.number for residue in after]),
        ins_code=np.array([residue.ins_code for residue in after], dtype=np.str_),
        line=np.array(grid.lines),
    )


def _without_blank_targets(grid: Grid) -> Grid:
    """Drop rows that lead nowhere, as the table of `match` has them."""
    column = find_column(grid.header, _NUMBER)
    kept = [n for n, row in enumerate(grid.rows) if row[column]]
    if not kept:
        problem, remedy = "maps no number", "fill the column auth_seq_id"
        raise FileProblemError(grid.path, problem, remedy)
    rows = tuple(grid.rows[n] for n in kept)
    return replace(grid, rows=rows, lines=tuple(grid.lines[n] for n in kept))


def _residues(
    grid: Grid, number: tuple[str, ...], chain: tuple[str, ...], code: tuple[str, ...]
) -> list[ResidueNumber]:
    """Return the residues that one half of the columns names."""
    column = find_column(grid.header, number)
    if column < 0:
        problem = f"do not name {number[0]}"
        remedy = "call them table_seq_id and auth_seq_id, or from and to"
        raise UnclearColumnsError(grid.path, grid.header, problem, remedy)
    chains = [find_column(grid.header, chain), find_column(grid.header, code)]
    residues: list[ResidueNumber] = []
    for row, line in zip(grid.rows, grid.lines, strict=True):
        named = grid.header[column]
        residue = parse_residue(row[column], path=grid.path, row=line, column=named)
        own_chain, own_code = (row[c] if c >= 0 else "" for c in chains)
        residues.append(
            ResidueNumber(
                own_chain or residue.chain,
                "",
                residue.number,
                own_code or residue.ins_code,
            )
        )
    return residues
