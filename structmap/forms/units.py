"""Whether a unit holds together in each form, and what that says over all of them."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import (
    COMPLEX,
    KINDS,
    LATTICE,
    Contacts,
    contacts_within,
    make_site_graph,
)
from structmap.forms.reading import Form
from structmap.lattice import judge_lattice
from structmap.quotient import lay_out_unit
from structmap.sites import Sites

MOLECULE = "property of the molecule"
ASSEMBLY = "property of the molecule and its assembly"
ARTEFACT = "artefact of this crystal"
REPEATED = "joined by the lattice in every form"
FOUND_INSIDE = "joined by the lattice here, within the molecule in another form"
MIXED = "joined by the lattice here, differs between the other forms"
DEPENDS = "depends on the form"
APART = "apart in the form measured"
UNTOLD = "cannot be told: no other form models it"


@dataclass(frozen=True, slots=True, kw_only=True)
class UnitInForm:
    """A unit in one form.

    Attributes
    ----------
    n_members, n_modelled : int
        Members, and those that the form models.
    connected : bool
        Whether contacts of any kind hold a copy of every modelled member together.
    level : str
        First kind that does, with those before it: ``chain``, ``complex``,
        ``lattice``; ``apart`` when none does; ``not modelled`` when fewer than half of
        the members, or fewer than two, are there.
    kinds : tuple of str
        Kinds of contact between members up to that level.
    lattice_verdict : str
        As in the analysis of one form.
    lattice_operators : tuple of str
        Operators that join it across the crystal.
    level_without_assemblies : str
        The level when contacts of the file's assemblies count as lattice contacts.
    """

    n_members: int
    n_modelled: int
    connected: bool
    level: str
    kinds: tuple[str, ...]
    lattice_verdict: str
    lattice_operators: tuple[str, ...]
    level_without_assemblies: str


def judge_unit_in_form(
    members: NDArray[np.int64], form: Form, *, sites: Sites
) -> UnitInForm:
    """Tell how a unit holds together in a form.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    form : Form
        The form.
    sites : Sites
        The sites with their copies in this form.

    Returns
    -------
    UnitInForm
        Members that the form does not model are left aside.
    """
    present = members[sites.residue[members] >= 0]
    if len(present) < 2 or 2 * len(present) < len(members):
        return UnitInForm(
            n_members=len(members),
            n_modelled=len(present),
            connected=False,
            level="not modelled",
            kinds=(),
            lattice_verdict="",
            lattice_operators=(),
            level_without_assemblies="not modelled",
        )
    contacts = contacts_within(form.contacts, form.cutoff_angstrom)
    level = _level(present, form, sites, contacts)
    verdict = judge_lattice(
        present,
        make_site_graph(contacts, sites, cutoff_angstrom=form.cutoff_angstrom),
        structure=form.structure,
        sites=sites,
        contacts=contacts,
        assemblies=form.assemblies,
    )
    return UnitInForm(
        n_members=len(members),
        n_modelled=len(present),
        connected=level != "apart",
        level=level,
        kinds=_kinds(present, sites, contacts, level),
        lattice_verdict=verdict.verdict,
        lattice_operators=verdict.operators if level == KINDS[LATTICE] else (),
        level_without_assemblies=_level(
            present, form, sites, _without_assemblies(form, contacts)
        ),
    )


def _level(
    members: NDArray[np.int64], form: Form, sites: Sites, contacts: Contacts
) -> str:
    layout = lay_out_unit(members, form.structure, sites=sites, contacts=contacts)
    covered = [level.kind for level in layout.levels if level.is_covered]
    return covered[0] if covered else "apart"


def _without_assemblies(form: Form, contacts: Contacts) -> Contacts:
    """Return the contacts with those of the assemblies called lattice contacts."""
    if form.structure.crystal is None:
        return contacts
    kind = np.where(contacts.kind == COMPLEX, LATTICE, contacts.kind)
    return replace(contacts, kind=kind)


def _kinds(
    members: NDArray[np.int64], sites: Sites, contacts: Contacts, level: str
) -> tuple[str, ...]:
    if level not in KINDS:
        return ()
    own = sites.copy_residue[np.isin(sites.copy_site, members)]
    inside = np.isin(contacts.residue_1, own) & np.isin(contacts.residue_2, own)
    inside &= contacts.kind <= KINDS.index(level)
    return tuple(KINDS[kind] for kind in np.unique(contacts.kind[inside]))


def verdict_over_forms(found: Sequence[UnitInForm]) -> str:
    """Return what several forms say of a unit together.

    Parameters
    ----------
    found : sequence of UnitInForm
        The form that was measured first.

    Returns
    -------
    str
        One of a few phrases; forms that do not model the unit have no say.

    Raises
    ------
    ValueError
        If there is no form.
    """
    if not found:
        raise ValueError("found is empty; give the form that was measured at least")
    measured = _strength(found[0])
    others = {_strength(form) for form in found[1:] if form.level != "not modelled"}
    if not others:
        return UNTOLD
    if measured == "apart":
        return APART
    if measured != "lattice":
        return _of_the_molecule(others | {measured})
    if others <= {"chain", "complex"}:
        return FOUND_INSIDE
    only = {frozenset({"lattice"}): REPEATED, frozenset({"apart"}): ARTEFACT}
    return only.get(frozenset(others), MIXED)


def _of_the_molecule(kinds: set[str]) -> str:
    if kinds == {"chain"}:
        return MOLECULE
    return ASSEMBLY if kinds <= {"chain", "complex"} else DEPENDS


def _strength(form: UnitInForm) -> str:
    """Return the kind that holds a unit; the verdict's tolerance of 80 % counts."""
    by_verdict = {"internal": "chain", "interface": "complex"}
    if form.level == "lattice" and form.lattice_verdict in by_verdict:
        return by_verdict[form.lattice_verdict]
    return form.level
