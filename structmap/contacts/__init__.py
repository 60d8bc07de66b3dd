"""Contacts over the whole crystal, exact and labelled by operator and cell shift."""

from structmap.contacts.assemblies import choose_assemblies
from structmap.contacts.describing import (
    contact_cutoff,
    contact_matrix,
    contacts_where,
    contacts_within,
    image_matrix,
    mate_matrix,
    operator_text,
    overlap_warning,
)
from structmap.contacts.finding import find_contacts
from structmap.contacts.group import GroupTable, inverse_elements, make_group_table
from structmap.contacts.record import (
    CHAIN,
    COMPLEX,
    KINDS,
    LATTICE,
    Contacts,
    SiteGraph,
)
from structmap.contacts.site_graph import make_site_graph

__all__ = [
    "CHAIN",
    "COMPLEX",
    "KINDS",
    "LATTICE",
    "Contacts",
    "GroupTable",
    "SiteGraph",
    "choose_assemblies",
    "contact_cutoff",
    "contact_matrix",
    "contacts_where",
    "contacts_within",
    "find_contacts",
    "image_matrix",
    "inverse_elements",
    "make_group_table",
    "make_site_graph",
    "mate_matrix",
    "operator_text",
    "overlap_warning",
]
