"""Reading measured values: tables with a row a site or a row a point."""

from structmap.values.records import NumberMapping, Quantity, ValueTable

__all__ = ["NumberMapping", "Quantity", "ValueTable"]
