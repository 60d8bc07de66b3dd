"""Where sites lie, and the table of how rows were matched."""

import numpy as np
from numpy.typing import NDArray

from structmap.sites.record import Sites
from structmap.sites.residue_names import names_agree
from structmap.structure import Structure, residue_label
from structmap.values import ValueTable


def site_centres(structure: Structure, sites: Sites) -> NDArray[np.float64]:
    """Return the centroid of the heavy atoms of each site.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    sites : Sites
        The matched sites.

    Returns
    -------
    ndarray of float64, shape (n_sites, 3)
        In Å, of the first copy in the first model, alternate conformations included;
        NaN for a row without a residue.
    """
    n_residues = len(structure.auth_seq_id)
    first = np.flatnonzero(structure.model_of_atom == structure.model_of_atom.min())
    owner = structure.residue_of_atom[first]
    n_atoms = np.bincount(owner, minlength=n_residues)
    total = np.zeros((n_residues, 3))
    np.add.at(total, owner, structure.position[first])
    centre = np.full((len(sites.residue), 3), np.nan)
    there = (sites.residue >= 0) & (n_atoms[sites.residue] > 0)
    residue = sites.residue[there]
    centre[there] = total[residue] / n_atoms[residue][:, None]
    return centre


def match_rows(
    structure: Structure, table: ValueTable, sites: Sites
) -> list[dict[str, str | int]]:
    """Return the reconciliation of the numbering, a row a site.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    table : ValueTable
        The measured values.
    sites : Sites
        The matched sites.

    Returns
    -------
    list of dict
        ``auth_…`` is said of the coordinates and blank for a row without a residue,
        ``table_…`` as it stands in the value table. ``status`` is ``matched``,
        ``mismatch`` (another residue name) or ``unmatched``. Written to a file, the
        rows can be edited and read back by `read_mapping`.
    """
    return [_row(structure, table, sites, site) for site in range(len(sites.name))]


def _row(
    structure: Structure, table: ValueTable, sites: Sites, site: int
) -> dict[str, str | int]:
    row, residue = int(sites.row[site]), int(sites.residue[site])
    copies = sites.copy_residue[sites.copy_site == site]
    called, status, there = str(table.comp_id[row]), "unmatched", residue >= 0
    if there:
        agree = names_agree(called, str(structure.auth_comp_id[residue]))
        status = "mismatch" if agree is False else "matched"
    return {
        "auth_asym_id": str(structure.auth_asym_id[residue]) if there else "",
        "auth_seq_id": int(structure.auth_seq_id[residue]) if there else "",
        "pdbx_PDB_ins_code": str(structure.ins_code[residue]) if there else "",
        "auth_comp_id": str(structure.auth_comp_id[residue]) if there else "",
        "atom": str(sites.atom[site]),
        "table_asym_id": str(table.auth_asym_id[row]),
        "table_seq_id": int(table.auth_seq_id[row]),
        "table_ins_code": str(table.ins_code[row]),
        "table_comp_id": called,
        "status": status,
        "copies": " ".join(residue_label(structure, int(copy)) for copy in copies),
    }
