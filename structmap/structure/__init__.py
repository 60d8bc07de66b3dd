"""Reading coordinates: polymer residues, their atoms, the crystal, the assemblies."""

from structmap.structure.confidence import (
    LOW_CONFIDENCE,
    VERY_LOW_CONFIDENCE,
    is_low_confidence,
    residue_confidence,
)
from structmap.structure.names import one_letter, residue_label
from structmap.structure.parting import LigandPart, part_atom, part_residues
from structmap.structure.reading import read_structure
from structmap.structure.record import (
    LIGAND,
    LIGAND_PART,
    POLYMER,
    WATER,
    Assembly,
    ChainCopy,
    Crystal,
    Structure,
)

__all__ = [
    "LIGAND",
    "LIGAND_PART",
    "LOW_CONFIDENCE",
    "POLYMER",
    "VERY_LOW_CONFIDENCE",
    "WATER",
    "Assembly",
    "ChainCopy",
    "Crystal",
    "LigandPart",
    "Structure",
    "is_low_confidence",
    "one_letter",
    "part_atom",
    "part_residues",
    "read_structure",
    "residue_confidence",
    "residue_label",
]
