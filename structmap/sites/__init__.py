"""Bringing the numbering of the values and of the coordinates together."""

from structmap.sites.ligands import PartedSites, part_ligands
from structmap.sites.listing import match_rows, site_centres
from structmap.sites.matching import match_sites
from structmap.sites.record import ChainMatch, Sites

__all__ = [
    "ChainMatch",
    "PartedSites",
    "Sites",
    "match_rows",
    "match_sites",
    "part_ligands",
    "site_centres",
]
