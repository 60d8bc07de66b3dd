"""The files of one analysis, as text: three tables, mapped coordinates, the run record."""

import json
from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import gemmi
import numpy as np

from structmap.contacts import KINDS, LATTICE, Contacts
from structmap.errors import FileProblemError
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.structure import Structure
from structmap.version import __version__
from structmap.words import site_name, unit_sentence

Cell = str | int | float | bool | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table before it is written.

    Attributes
    ----------
    columns : tuple of str
        Heading.
    rows : tuple of tuple
        Cells: text, numbers, truth values, None for blank.
    """

    columns: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]


def table_text(table: Table) -> str:
    """Return a table as CSV: no comments, ``yes`` and ``no``, blank for nothing.

    Parameters
    ----------
    table : Table

    Returns
    -------
    str
        Lines that end in a line feed.
    """
    lines = [table.columns, *table.rows]
    return "".join(",".join(_cell(cell) for cell in line) + "\n" for line in lines)


def _cell(cell: Cell) -> str:
    if cell is None:
        return ""
    if isinstance(cell, bool | np.bool_):
        return "yes" if cell else "no"
    if isinstance(cell, float | np.floating):
        return "" if np.isnan(cell) else f"{cell:.6g}"
    text = str(cell)
    if any(mark in text for mark in ',"\n\r'):
        return '"' + text.replace('"', '""') + '"'
    return text


# --- sites.csv ------------------------------------------------------------------------


def sites_table(record: AnalysisRecord) -> Table:
    """Return a row for each measured site, with what was found of it.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    Table
        ``sites.csv``.
    """
    values = _value_columns(record)
    columns = (
        *("site", "auth_asym_id", "auth_seq_id", "pdbx_PDB_ins_code", "auth_comp_id", "atom"),
        *("copies", *values, "deviation", "moves", "motional_unit", "membership_probability"),
        *("edge_filter_unit", "touches_lattice", "lattice_partners", "relative_exposure", "note"),
    )
    partners = _lattice_partners(record)
    found = _found_columns(record)
    rows = tuple(
        (
            *_identity(record, site),
            *(column[site] for column in values.values()),
            *(column[site] for column in found),
            bool(partners[site]),
            " ".join(partners[site]),
            None,
            _note(record, site),
        )
        for site in range(len(record.sites.name))
    )
    return Table(columns=columns, rows=rows)


def _identity(record: AnalysisRecord, site: int) -> tuple[Cell, ...]:
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
    residue : int
        Index of a residue.

    Returns
    -------
    str
        For tables.
    """
    number = f"{structure.auth_seq_id[residue]}{structure.ins_code[residue]}"
    return f"{structure.auth_asym_id[residue]}/{number}"


def _value_columns(record: AnalysisRecord) -> dict[str, Sequence[Cell]]:
    """Return the value columns: the summary of a profile, or each quantity."""
    row = record.sites.row
    if record.measurements.is_profile:
        summary = _spread(record, record.behaviour.summary)
        return {"value": summary, "value_error": _spread(record, record.behaviour.summary_error)}
    columns: dict[str, Sequence[Cell]] = {}
    for quantity in record.table.quantities:
        if quantity.value.shape[1] == 1:
            columns[quantity.name] = quantity.value[row, 0].tolist()
            columns[f"{quantity.name}_error"] = quantity.error[row, 0].tolist()
    return columns


def _spread(record: AnalysisRecord, values: np.ndarray[Any, Any]) -> list[Cell]:
    """Return values of the compared sites as a list over all sites."""
    out: list[Cell] = [None] * len(record.sites.name)
    for site, value in zip(record.measurements.site, values.tolist(), strict=True):
        out[int(site)] = value
    return out


def _found_columns(record: AnalysisRecord) -> tuple[Sequence[Cell], ...]:
    behaviour = record.behaviour
    unit = record.unit_of_site()
    names = [record.units[u].name if u >= 0 else None for u in unit]
    simple = [f"E{u}" if u else None for u in behaviour.edge_filter_unit.tolist()]
    return (
        _spread(record, behaviour.deviation),
        _spread(record, behaviour.moves),
        names,
        record.membership_probability.tolist(),
        _spread(record, np.array(simple, dtype=object)),
    )


def _lattice_partners(record: AnalysisRecord) -> list[list[str]]:
    """Return for each site the residues that it touches only through the crystal."""
    structure, contacts = record.structure, record.contacts
    sites_of_residue: dict[int, list[int]] = {}
    for site, residue in zip(record.sites.copy_site, record.sites.copy_residue, strict=True):
        sites_of_residue.setdefault(int(residue), []).append(int(site))
    partners: list[list[str]] = [[] for _ in record.sites.name]
    for index in np.flatnonzero(contacts.kind == LATTICE):
        pair = int(contacts.residue_1[index]), int(contacts.residue_2[index])
        for own, other in (pair, pair[::-1]):
            for site in sites_of_residue.get(own, ()):
                partners[site].append(residue_text(structure, other))
    return [list(dict.fromkeys(found)) for found in partners]


def _note(record: AnalysisRecord, site: int) -> str:
    sites, table = record.sites, record.table
    row, residue = int(sites.row[site]), int(sites.residue[site])
    if residue < 0:
        return "no residue in the coordinates"
    notes = []
    number = f"{table.auth_seq_id[row]}{table.ins_code[row]}"
    here = f"{record.structure.auth_seq_id[residue]}{record.structure.ins_code[residue]}"
    if number != here:
        notes.append(f"{number} in the table")
    if site not in set(record.measurements.site.tolist()):
        notes.append("too few values to compare")
    fringe = [unit.name for unit in record.units if site in unit.fringe]
    notes += [f"fringe of {name}" for name in fringe]
    return "; ".join(notes)


# --- motional_units.csv and contacts.csv ----------------------------------------------


def units_table(record: AnalysisRecord) -> Table:
    """Return a row for each motional unit.

    Parameters
    ----------
    record : AnalysisRecord

    Returns
    -------
    Table
        ``motional_units.csv``.
    """
    columns = (
        *("motional_unit", "n_sites", "sites", "energy", "verdict", "p_any", "p_place"),
        *("p_smooth", "stability", "contrast", "lattice_verdict", "lattice_operators"),
        *("share_kept_without_lattice", "pieces_without_lattice", "joining_distance_chain"),
        *("joining_distance_complex", "joining_distance_lattice", "one_process", "parameter"),
        *("parameter_low", "parameter_high", "plain_words"),
    )
    return Table(columns=columns, rows=tuple(_unit_row(record, unit) for unit in record.units))


def _unit_row(record: AnalysisRecord, unit: MotionalUnit) -> tuple[Cell, ...]:
    lattice = unit.lattice
    names = record.sites.name
    pieces = " | ".join(" ".join(names[s] for s in piece) for piece in lattice.pieces_without_lattice)
    return (
        *(unit.name, len(unit.members), " ".join(names[unit.members]), unit.energy),
        *(unit.verdict, unit.p_any, unit.p_place, unit.p_smooth, unit.stability),
        *(unit.contrast, lattice.verdict, "; ".join(lattice.operators)),
        *(lattice.share_kept_without_lattice, pieces, *lattice.joining_distance_angstrom),
        *(None, None, None, None),
        plain(unit_sentence(record, unit)),
    )


def plain(text: str) -> str:
    """Return text with ordinary spaces, for tables and terminals.

    Parameters
    ----------
    text : str

    Returns
    -------
    str
        Without no-break and thin spaces.
    """
    return text.replace("\u00a0", " ").replace("\u202f", " ")


def contacts_table(structure: Structure, contacts: Contacts) -> Table:
    """Return a row for each residue contact of the crystal.

    Parameters
    ----------
    structure : Structure
    contacts : Contacts
        Of that structure.

    Returns
    -------
    Table
        ``contacts.csv``.
    """
    own = ("auth_asym_id", "auth_seq_id", "pdbx_PDB_ins_code", "auth_comp_id")
    columns = (
        *(f"{name}_1" for name in own),
        *(f"{name}_2" for name in own),
        *("kind", "operator", "shift_a", "shift_b", "shift_c", "assembly_operator"),
        *("ncs_1", "ncs_2", "distance_angstrom", "atom_1", "atom_2", "chemistry"),
    )
    first = _residue_columns(structure, contacts.residue_1)
    second = _residue_columns(structure, contacts.residue_2)
    crystal = structure.crystal
    triplets = [""] if crystal is None else [*crystal.triplets, ""]
    rows = zip(
        *first[:4],
        *second[:4],
        [KINDS[kind] for kind in contacts.kind],
        [triplets[operator] for operator in contacts.operator],
        *contacts.shift.T.tolist(),
        contacts.assembly_operator.tolist(),
        first[4],
        second[4],
        [f"{distance:.3f}" for distance in contacts.distance_angstrom],
        structure.atom_name[contacts.atom_1].tolist(),
        structure.atom_name[contacts.atom_2].tolist(),
        [None] * len(contacts.kind),
        strict=True,
    )
    return Table(columns=columns, rows=tuple(rows))


def _residue_columns(structure: Structure, residue: np.ndarray[Any, Any]) -> list[list[Cell]]:
    ncs = np.array([copy.ncs for copy in structure.chain_copies])
    return [
        structure.auth_asym_id[residue].tolist(),
        structure.auth_seq_id[residue].tolist(),
        structure.ins_code[residue].tolist(),
        structure.auth_comp_id[residue].tolist(),
        ncs[structure.copy_of_residue[residue]].tolist(),
    ]


# --- mapped.cif -----------------------------------------------------------------------


def mapped_coordinates(record: AnalysisRecord, coordinates: Path) -> str:
    """Return the coordinates with the value of each site in the B column, as mmCIF.

    Atoms of residues that were not measured have B 0. The category ``_structmap_site``
    holds value, error and unit of each site.

    Parameters
    ----------
    record : AnalysisRecord
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
                key = (chain.name, residue.seqid.num, residue.seqid.icode.strip())
                for atom in residue:
                    atom.b_iso = value.get(key, 0.0)
    document = structure.make_mmcif_document()
    block = document.sole_block()
    _add_category(block, record)
    return str(document.as_string())


def _read_again(record: AnalysisRecord, coordinates: Path) -> gemmi.Structure:
    from_disk = "read it again"
    try:
        structure = gemmi.read_structure(str(coordinates))
    except (OSError, RuntimeError, ValueError) as error:
        raise FileProblemError(coordinates, f"cannot be read any more ({error})", from_disk) from error
    structure.setup_entities()
    if structure.name.strip() == "":
        structure.name = record.structure.entry_id or "model"
    return structure


def _value_of_residue(record: AnalysisRecord) -> dict[tuple[str, int, str], float]:
    structure, sites = record.structure, record.sites
    summary = _spread(record, record.behaviour.summary)
    out = {}
    for site, residue in zip(sites.copy_site, sites.copy_residue, strict=True):
        value = summary[int(site)]
        if isinstance(value, float) and not np.isnan(value):
            number = int(structure.auth_seq_id[residue])
            key = (str(structure.auth_asym_id[residue]), number, str(structure.ins_code[residue]))
            out.setdefault(key, value)
    return out


def _add_category(block: Any, record: AnalysisRecord) -> None:
    names = ("auth_asym_id", "auth_seq_id", "pdbx_PDB_ins_code", "auth_comp_id")
    more = ("quantity", "unit", "value", "value_error", "moves", "motional_unit")
    loop = block.init_loop("_structmap_site.", ["id", *names, *more])
    summary = _spread(record, record.behaviour.summary)
    error = _spread(record, record.behaviour.summary_error)
    moves = _spread(record, record.behaviour.moves)
    unit = record.unit_of_site()
    for site in record.measurements.site.tolist():
        _, *place, _, _ = _identity(record, site)
        named = record.units[unit[site]].name if unit[site] >= 0 else None
        quantity = (record.behaviour.summary_name, record.behaviour.summary_unit)
        cells = [*place, *quantity, summary[site], error[site], moves[site], named]
        texts = [_cell(cell) for cell in cells]
        loop.add_row([str(site + 1), *(gemmi.cif.quote(text) if text else "." for text in texts)])


# --- run.json -------------------------------------------------------------------------


def run_text(record: AnalysisRecord, notes: Iterable[str] = ()) -> str:
    """Return what was run on what, as JSON.

    Parameters
    ----------
    record : AnalysisRecord
    notes : iterable of str
        What else to keep.

    Returns
    -------
    str
        Version, settings, seed, SHA-256 of the inputs, library versions, counts,
        warnings. No time of day and no path.
    """
    structure, table = record.structure, record.table
    settings = asdict(record.settings)
    inputs = {structure.name: structure.sha256, **dict(zip(table.names, table.sha256, strict=True))}
    content = {
        "structmap": __version__,
        "seed": settings.pop("seed"),
        "settings": settings,
        "inputs_sha256": inputs,
        "libraries": library_versions(),
        "counts": _counts(record),
        "error_scale": round(record.behaviour.error_scale, 6),
        "baseline": {
            "degree_of_trend": record.behaviour.degree,
            "share_of_variance": round(record.behaviour.trend_share, 6),
        },
        "numbering": [asdict(chain) for chain in record.sites.chains],
        "residue_names_that_differ": list(record.sites.mismatches),
        "rows_without_residue": list(record.sites.unmatched),
        "warnings": [plain(text) for text in record.warnings],
        "notes": [
            plain(text)
            for text in (
                *structure.warnings,
                *table.notes,
                *record.sites.notes,
                *record.measurements.notes,
                *notes,
            )
        ],
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def _counts(record: AnalysisRecord) -> dict[str, int]:
    kinds = {f"{kind}_contacts": int((record.contacts.kind == k).sum()) for k, kind in enumerate(KINDS)}
    return {
        "rows": len(record.table.auth_seq_id),
        "sites": int((record.sites.residue >= 0).sum()),
        "compared": len(record.measurements.site),
        "moving": int(record.behaviour.moves.sum()),
        "motional_units": len(record.units),
        "points_left_out": sum(bool(r) for r in record.measurements.point_reason),
        **kinds,
    }


def library_versions() -> dict[str, str]:
    """Return the versions of the libraries that the result rests on.

    Returns
    -------
    dict of str to str
        Name and version, ``absent`` for one that is not installed.
    """
    out = {}
    for name in ("gemmi", "numpy", "scipy", "py3Dmol"):
        try:
            out[name] = version(name)
        except PackageNotFoundError:
            out[name] = "absent"
    return out


def short_names(record: AnalysisRecord, sites: Iterable[int]) -> str:
    """Return the short names of sites in one line.

    Parameters
    ----------
    record : AnalysisRecord
    sites : iterable of int
        Indices of sites.

    Returns
    -------
    str
        ``S28 N31``.
    """
    return " ".join(site_name(record, site) for site in sites)
