"""Motional units: connected sites that move and behave alike."""

from structmap.motional_units.search import UnitSearch, find_motional_units

__all__ = ["UnitSearch", "find_motional_units"]
