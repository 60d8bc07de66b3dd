"""Reading measured values: tables with a row a site or a row a point."""

from structmap.values.files import read_values
from structmap.values.mapping import read_mapping
from structmap.values.records import NumberMapping, Quantity, ValueTable

__all__ = ["NumberMapping", "Quantity", "ValueTable", "read_mapping", "read_values"]
