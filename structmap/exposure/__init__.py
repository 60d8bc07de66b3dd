"""How far residues lie open to solvent, and what each neighbour covers."""

from structmap.exposure.burial import Exposure, find_exposure
from structmap.exposure.interfaces import Interfaces, find_interfaces

__all__ = ["Exposure", "Interfaces", "find_exposure", "find_interfaces"]
