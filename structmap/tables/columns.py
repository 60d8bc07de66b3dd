"""Columns that several tables share."""

from typing import Any

import numpy as np

from structmap.plain_table import Cell
from structmap.result import AnalysisRecord
from structmap.structure import Structure, residue_label


def site_identity(record: AnalysisRecord, site: int) -> tuple[Cell, ...]:
    """Return what names a site: the first seven columns of ``sites.csv``.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    site : int
        Index of a site.

    Returns
    -------
    tuple
        Site, chain, number, insertion code, component, atom, copies.
    """
    structure, sites = record.structure, record.sites
    residue = int(sites.residue[site])
    if residue < 0:
        row = int(sites.row[site])
        table = record.table
        where = (table.auth_asym_id[row], table.auth_seq_id[row], table.ins_code[row])
        return (sites.name[site], *where, table.comp_id[row], sites.atom[site], "")
    return (
        sites.name[site],
        structure.auth_asym_id[residue],
        int(structure.auth_seq_id[residue]),
        structure.ins_code[residue],
        structure.auth_comp_id[residue],
        sites.atom[site],
        " ".join(dict.fromkeys(_copy_labels(record, site))),
    )


def _copy_labels(record: AnalysisRecord, site: int) -> list[str]:
    copies = record.sites.copy_residue[record.sites.copy_site == site]
    return [residue_text(record.structure, int(residue)) for residue in copies]


def residue_text(structure: Structure, residue: int) -> str:
    """Return a residue as chain, number and insertion code, ``A/56A``.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    residue : int
        Index of a residue.

    Returns
    -------
    str
        For tables; an atom of a ligand ends it, ``A/401/FE``.
    """
    return residue_label(structure, residue)


def spread_over_sites(
    record: AnalysisRecord, values: np.ndarray[Any, Any]
) -> list[Cell]:
    """Return values of the compared sites as a list over all sites.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    values : ndarray, shape (n,)
        One for each compared site.

    Returns
    -------
    list
        None for a site that is not compared.
    """
    out: list[Cell] = [None] * len(record.sites.name)
    for site, value in zip(record.measurements.site, values.tolist(), strict=True):
        out[int(site)] = value
    return out
