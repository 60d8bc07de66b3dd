"""``motional_units.csv``: a row for each motional unit."""

from structmap.one_process import ONE_PROCESS_COLUMNS, table_rows
from structmap.plain_table import Cell, Table, plain
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.words import unit_sentence


def units_table(record: AnalysisRecord) -> Table:
    """Return a row for each motional unit.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    Table
        ``motional_units.csv``.
    """
    columns = (
        *("motional_unit", "n_sites", "sites", "energy", "verdict", "p_any", "p_place"),
        *("p_smooth", "stability", "contrast", "lattice_verdict", "lattice_operators"),
        *(
            "share_kept_without_lattice",
            "pieces_without_lattice",
            "share_by_lattice_alone",
            "joining_distance_chain",
        ),
        *(
            "joining_distance_complex",
            "joining_distance_lattice",
            "one_process",
            "parameter",
        ),
        *("parameter_low", "parameter_high", "plain_words"),
    )
    return Table(
        columns=columns, rows=tuple(_unit_row(record, unit) for unit in record.units)
    )


def _unit_row(record: AnalysisRecord, unit: MotionalUnit) -> tuple[Cell, ...]:
    lattice = unit.lattice
    names = record.sites.name
    pieces = " | ".join(
        " ".join(names[s] for s in piece) for piece in lattice.pieces_without_lattice
    )
    return (
        *(unit.name, len(unit.members), " ".join(names[unit.members]), unit.energy),
        *(unit.verdict, unit.p_any, unit.p_place, unit.p_smooth, unit.stability),
        *(unit.contrast, lattice.verdict, "; ".join(lattice.operators)),
        *(
            lattice.share_kept_without_lattice,
            pieces,
            record.hold_of(unit).largest_by_lattice_alone / len(unit.members),
            *lattice.joining_distance_angstrom,
        ),
        *_process_cells(record, unit),
        plain(unit_sentence(record, unit)),
    )


def _process_cells(record: AnalysisRecord, unit: MotionalUnit) -> tuple[Cell, ...]:
    process = record.process_of(unit)
    if process is None:
        return (None, None, None, None)
    if process.verdict == "distinct":
        return (process.verdict, None, None, None)
    return (process.verdict, process.value, process.low, process.high)


def processes_table(record: AnalysisRecord) -> Table:
    """Return a row for each unit that was held against a model.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    Table
        ``one_process.csv``.
    """
    rows = table_rows(record.processes)
    return Table(
        columns=ONE_PROCESS_COLUMNS, rows=tuple(tuple(row.values()) for row in rows)
    )
