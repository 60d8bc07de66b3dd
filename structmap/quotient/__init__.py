"""The labelled quotient graph: units over images, and whether they close or go on."""

from structmap.quotient.closure import Closure, close_group, close_transforms
from structmap.quotient.elements import (
    CartesianElements,
    CrystalElements,
    Elements,
    elements_of_contacts,
    make_elements,
)
from structmap.quotient.extent import (
    AssemblyExtent,
    ExtentPart,
    assembly_extent,
    directions,
    extent_sentence,
)
from structmap.quotient.placement import Edges, Placement, cycle_elements, place_nodes
from structmap.quotient.unit import UnitLayout, UnitLevel, lay_out_unit

__all__ = [
    "AssemblyExtent",
    "CartesianElements",
    "Closure",
    "CrystalElements",
    "Edges",
    "Elements",
    "ExtentPart",
    "Placement",
    "UnitLayout",
    "UnitLevel",
    "assembly_extent",
    "close_group",
    "close_transforms",
    "cycle_elements",
    "directions",
    "elements_of_contacts",
    "extent_sentence",
    "lay_out_unit",
    "make_elements",
    "place_nodes",
]
