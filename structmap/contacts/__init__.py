"""Contacts over the whole crystal, exact and labelled by operator and cell shift."""

from structmap.contacts.record import CHAIN, COMPLEX, KINDS, LATTICE, Contacts, SiteGraph

__all__ = ["CHAIN", "COMPLEX", "KINDS", "LATTICE", "Contacts", "SiteGraph"]
