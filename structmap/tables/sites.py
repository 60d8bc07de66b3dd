"""``sites.csv``: a row for each measured site."""

from collections.abc import Mapping, Sequence

import numpy as np

from structmap.contacts import LATTICE
from structmap.plain_table import Cell, Table, plain
from structmap.result import AnalysisRecord
from structmap.tables.columns import residue_text, site_identity, spread_over_sites
from structmap.words import confidence_note, find_gaps, gap_note


def sites_table(record: AnalysisRecord) -> Table:
    """Return a row for each measured site, with what was found of it.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    Table
        ``sites.csv``.
    """
    values = _value_columns(record)
    columns = (
        *(
            "site",
            "auth_asym_id",
            "auth_seq_id",
            "pdbx_PDB_ins_code",
            "auth_comp_id",
            "atom",
        ),
        *(
            "copies",
            *values,
            "deviation",
            "moves",
            "motional_unit",
            "membership_probability",
        ),
        *(
            "edge_filter_unit",
            "touches_lattice",
            "lattice_partners",
            "relative_exposure",
            "contact_number",
            "mate_distance_angstrom",
            "secondary_structure",
            "note",
        ),
    )
    partners = _lattice_partners(record)
    unit_of = record.unit_of_site()
    gaps = {s: near for s, near in find_gaps(record).items() if unit_of[s] >= 0}
    compared = frozenset(record.measurements.site.tolist())
    found = _found_columns(record)
    rows = tuple(
        (
            *site_identity(record, site),
            *(column[site] for column in values.values()),
            *(column[site] for column in found),
            bool(partners[site]),
            " ".join(partners[site]),
            *_surroundings(record, site),
            _note(record, site, compared=compared, gaps=gaps),
        )
        for site in range(len(record.sites.name))
    )
    return Table(columns=columns, rows=rows)


def _value_columns(record: AnalysisRecord) -> dict[str, Sequence[Cell]]:
    """Return the value columns: the summary of a profile, or each quantity."""
    row = record.sites.row
    if record.measurements.is_profile:
        summary = spread_over_sites(record, record.behaviour.summary)
        return {
            "value": summary,
            "value_error": spread_over_sites(record, record.behaviour.summary_error),
        }
    columns: dict[str, Sequence[Cell]] = {}
    for quantity in record.table.quantities:
        if quantity.value.shape[1] == 1:
            columns[quantity.name] = quantity.value[row, 0].tolist()
            columns[f"{quantity.name}_error"] = quantity.error[row, 0].tolist()
    return columns


def _found_columns(record: AnalysisRecord) -> tuple[Sequence[Cell], ...]:
    behaviour = record.behaviour
    unit = record.unit_of_site()
    names = [record.units[u].name if u >= 0 else None for u in unit]
    simple = [f"E{u}" if u else None for u in behaviour.edge_filter_unit.tolist()]
    return (
        spread_over_sites(record, behaviour.deviation),
        spread_over_sites(record, behaviour.moves),
        names,
        record.membership_probability.tolist(),
        spread_over_sites(record, np.array(simple, dtype=object)),
    )


def _lattice_partners(record: AnalysisRecord) -> list[list[str]]:
    """Return for each site the residues that it touches only through the crystal."""
    structure, contacts = record.structure, record.contacts
    sites_of_residue: dict[int, list[int]] = {}
    for site, residue in zip(
        record.sites.copy_site, record.sites.copy_residue, strict=True
    ):
        sites_of_residue.setdefault(int(residue), []).append(int(site))
    partners: list[list[str]] = [[] for _ in record.sites.name]
    for index in np.flatnonzero(contacts.kind == LATTICE):
        pair = int(contacts.residue_1[index]), int(contacts.residue_2[index])
        for own, other in (pair, pair[::-1]):
            for site in sites_of_residue.get(own, ()):
                partners[site].append(residue_text(structure, other))
    return [list(dict.fromkeys(found)) for found in partners]


def _surroundings(record: AnalysisRecord, site: int) -> tuple[Cell, ...]:
    """Return accessible share, contacts, nearest mate, and helix or strand of a site.

    The accessible share is that in the assembly; contacts are residues touched within
    chain, assembly and lattice; the mate is the nearest molecule of the lattice.
    """
    residue, exposure = int(record.sites.residue[site]), record.exposure
    if residue < 0:
        return (None,) * 4
    return (
        float(exposure.relative_in_assembly[residue]),
        int(exposure.contact_number[residue].sum()),
        float(exposure.mate_distance_angstrom[residue]),
        str(record.structure.secondary_structure[residue]),
    )


def _note(
    record: AnalysisRecord,
    site: int,
    *,
    compared: frozenset[int],
    gaps: Mapping[int, tuple[int, ...]],
) -> str:
    sites, table = record.sites, record.table
    row, residue = int(sites.row[site]), int(sites.residue[site])
    if residue < 0:
        return "no residue in the coordinates"
    notes = []
    number = f"{table.auth_seq_id[row]}{table.ins_code[row]}"
    here = (
        f"{record.structure.auth_seq_id[residue]}{record.structure.ins_code[residue]}"
    )
    if number != here:
        notes.append(f"{number} in the table")
    if site not in compared:
        notes.append("too few values to compare")
    fringe = [unit.name for unit in record.units if site in unit.fringe]
    notes += [f"fringe of {name}" for name in fringe]
    if site in gaps:
        notes.append(plain(gap_note(record, gaps[site])))
    return "; ".join(filter(None, (*notes, confidence_note(record, residue))))
