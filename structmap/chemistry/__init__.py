"""What contacts are made of, as far as heavy atoms can tell."""

from structmap.chemistry.bridges import Bridges, find_bridges
from structmap.chemistry.finding import find_chemistry
from structmap.chemistry.record import CHEMISTRY_KINDS, Chemistry

__all__ = [
    "CHEMISTRY_KINDS",
    "Bridges",
    "Chemistry",
    "find_bridges",
    "find_chemistry",
]
