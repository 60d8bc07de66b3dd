"""Reading coordinates: polymer residues, their atoms, the crystal, the assemblies."""

from structmap.structure.names import one_letter, residue_label
from structmap.structure.reading import read_structure
from structmap.structure.record import (
    LIGAND,
    POLYMER,
    WATER,
    Assembly,
    ChainCopy,
    Crystal,
    Structure,
)

__all__ = [
    "LIGAND",
    "POLYMER",
    "WATER",
    "Assembly",
    "ChainCopy",
    "Crystal",
    "Structure",
    "one_letter",
    "read_structure",
    "residue_label",
]
