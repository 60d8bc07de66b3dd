"""``mapped.cif``: the coordinates with the value of each site in the B column."""

import hashlib
from pathlib import Path
from typing import Any

import gemmi
import numpy as np

from structmap.errors import FileProblemError
from structmap.plain_table import cell_text
from structmap.result import AnalysisRecord
from structmap.structure import part_atom
from structmap.tables.columns import site_identity, spread_over_sites


def mapped_coordinates(record: AnalysisRecord, coordinates: Path) -> str:
    """Return the coordinates with the value of each site in the B column, as mmCIF.

    Atoms of residues that were not measured have B 0; of a ligand only the atoms that
    were measured have their values. The category ``_structmap_site`` holds value, error
    and unit of each site.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    coordinates : Path
        The file that was analysed.

    Returns
    -------
    str
        An mmCIF file.

    Raises
    ------
    FileProblemError
        If the file is gone or changed since it was analysed.
    """
    structure = _read_again(record, coordinates)
    value = _value_of_residue(record)
    for model in structure:
        for chain in model:
            for residue in chain:
                key = (chain.name, residue.seqid.num or 0, residue.seqid.icode.strip())
                for atom in residue:
                    whole = value.get((*key, ""), 0.0)
                    atom.b_iso = value.get((*key, atom.name), whole)
    document = structure.make_mmcif_document()
    block = document.sole_block()
    _add_category(block, record)
    return str(document.as_string())


def _read_again(record: AnalysisRecord, coordinates: Path) -> gemmi.Structure:
    """Return the coordinates as they were analysed, hydrogens and all."""
    remedy = "analyse it again"
    try:
        content = coordinates.read_bytes()
    except OSError as error:
        raise FileProblemError(
            coordinates, "cannot be read any more", remedy
        ) from error
    if hashlib.sha256(content).hexdigest() != record.structure.sha256:
        raise FileProblemError(coordinates, "changed since it was analysed", remedy)
    structure = gemmi.read_structure(str(coordinates))
    structure.setup_entities()
    if structure.name.strip() == "":
        structure.name = record.structure.entry_id or "model"
    return structure


def _value_of_residue(
    record: AnalysisRecord,
) -> dict[tuple[str, int, str, str], float]:
    """Return values by chain, number, insertion code, and atom in ligands."""
    structure, sites = record.structure, record.sites
    summary = spread_over_sites(record, record.behaviour.summary)
    out: dict[tuple[str, int, str, str], float] = {}
    for site, residue in zip(sites.copy_site, sites.copy_residue, strict=True):
        value = summary[int(site)]
        if isinstance(value, float) and not np.isnan(value):
            number = int(structure.auth_seq_id[residue])
            key = (
                str(structure.auth_asym_id[residue]),
                number,
                str(structure.ins_code[residue]),
                part_atom(structure, int(residue)),
            )
            out.setdefault(key, value)
    return out


def _add_category(block: Any, record: AnalysisRecord) -> None:
    names = (
        *("auth_asym_id", "auth_seq_id", "pdbx_PDB_ins_code", "auth_comp_id"),
        "auth_atom_id",
    )
    more = ("quantity", "unit", "value", "value_error", "moves", "motional_unit")
    loop = block.init_loop("_structmap_site.", ["id", *names, *more])
    summary = spread_over_sites(record, record.behaviour.summary)
    error = spread_over_sites(record, record.behaviour.summary_error)
    moves = spread_over_sites(record, record.behaviour.moves)
    unit = record.unit_of_site()
    for site in record.measurements.site.tolist():
        _, *place, _ = site_identity(record, site)
        named = record.units[unit[site]].name if unit[site] >= 0 else None
        quantity = (record.behaviour.summary_name, record.behaviour.summary_unit)
        cells = [*place, *quantity, summary[site], error[site], moves[site], named]
        texts = [cell_text(cell) for cell in cells]
        loop.add_row(
            [str(site + 1), *(gemmi.cif.quote(text) if text else "." for text in texts)]
        )
