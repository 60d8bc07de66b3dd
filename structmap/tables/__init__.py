"""The files of one analysis, as text: tables, mapped coordinates, run record."""

from structmap.contact_list import contacts_table
from structmap.plain_table import Cell, Table, cell_text, plain, table_text
from structmap.tables.mapped import mapped_coordinates
from structmap.tables.run import library_versions, run_text
from structmap.tables.sites import sites_table
from structmap.tables.units import processes_table, units_table

__all__ = [
    "Cell",
    "Table",
    "cell_text",
    "contacts_table",
    "library_versions",
    "mapped_coordinates",
    "plain",
    "processes_table",
    "run_text",
    "sites_table",
    "table_text",
    "units_table",
]
