"""What the pictures of several forms are drawn from: all laid on the measured one."""

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from structmap.contacts import Contacts, contact_matrix, contacts_within
from structmap.forms import Comparison, Form, FormMap, FormUnit
from structmap.page.forms_contacts import (
    ChangedContact,
    anchor_of,
    contact_payload,
    hundredths,
    moved_points,
    place_of_site,
    same_motion,
)
from structmap.page.markup import pretty_operator
from structmap.page.scene import first_conformation
from structmap.quotient import UnitLayout, lay_out_unit
from structmap.sites import Sites
from structmap.structure import POLYMER, Structure, one_letter

PICTURES = 8
MOST_RESIDUES = 1500
MARGIN_ANGSTROM = 4.0
LETTERS = {
    "N": "N",
    "CA": "A",
    "C": "C",
    "O": "O",
    "P": "P",
    "C4'": "4",
    "OP1": "1",
    "OP2": "2",
    "O5'": "5",
    "O3'": "3",
}


def forms_payload(
    found: Comparison, names: list[str], *, contacts: tuple[ChangedContact, ...]
) -> dict[str, Any]:
    """Return what the pictures of the forms are drawn from.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.
    names : list of str
        Of the forms.
    contacts : tuple of ChangedContact
        Those that are drawn and listed.

    Returns
    -------
    dict
        Of plain lists, numbers and text. Coordinates are in hundredths of Å, after
        superposition on the rigid core.
    """
    laid = _laid_on_first(found)[:PICTURES]
    place = place_of_site(found)
    drawn = [
        _form(form, own, transform)
        for form, own, transform in zip(found.forms, found.maps, laid, strict=False)
    ]
    for form, name in zip(drawn, names, strict=False):
        form["name"] = name
    units = [
        _unit(found, index, unit, transforms=laid)
        for index, unit in enumerate(found.units)
    ]
    return {
        "places": place_names(found),
        "sites": sorted({p for p in place.tolist() if p >= 0}),
        "forms": drawn,
        "units": units,
        "contacts": [contact_payload(found, row, transforms=laid) for row in contacts],
        "view": _opening_view(drawn),
    }


def _laid_on_first(found: Comparison) -> list[NDArray[np.float64]]:
    return [np.eye(4), *(pair.transform for pair in found.pairs)]


def place_names(found: Comparison) -> list[str]:
    """Return the short name of each place of the reference.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.

    Returns
    -------
    list of str
        ``D56A``, with its chain where several were measured, as the first form that
        models it has it; blank where none does.
    """
    out = [""] * len(found.maps[0].first_residue)
    for form, own in zip(found.forms, found.maps, strict=True):
        structure = form.structure
        several = len(np.unique(structure.auth_asym_id[_known(own.first_residue)])) > 1
        for place, residue in enumerate(own.first_residue.tolist()):
            if residue < 0 or out[place]:
                continue
            letter = one_letter(str(structure.auth_comp_id[residue]))
            text = f"{letter}{structure.auth_seq_id[residue]}"
            text += str(structure.ins_code[residue])
            chain = f"{structure.auth_asym_id[residue]}\u00a0" if several else ""
            out[place] = chain + text
    return out


def _known(residues: NDArray[np.int64]) -> NDArray[np.int64]:
    return residues[residues >= 0]


# --- threads --------------------------------------------------------------------------


def _form(
    form: Form, form_map: FormMap, transform: NDArray[np.float64]
) -> dict[str, Any]:
    structure = form.structure
    residues = carried_residues(structure, form_map)
    atoms = _backbone(structure, residues)
    of_atom = structure.residue_of_atom[atoms]
    place = form_map.place[residues]
    moved = moved_points(structure.position[atoms], transform)
    return {
        "place": place.tolist(),
        "chain": structure.copy_of_residue[residues].tolist(),
        "first": (form_map.first_residue[place] == residues).astype(int).tolist(),
        "atoms": np.bincount(
            np.searchsorted(residues, of_atom), minlength=len(residues)
        ).tolist(),
        "letters": "".join(LETTERS[str(n)] for n in structure.atom_name[atoms]),
        "xyz": hundredths(moved),
    }


def carried_residues(structure: Structure, form_map: FormMap) -> NDArray[np.int64]:
    """Return the residues of a form whose thread is drawn.

    Parameters
    ----------
    structure : Structure
        Coordinates of the form.
    form_map : FormMap
        Its residues laid on the measured chains.

    Returns
    -------
    ndarray of int
        Of all copies of the measured chains; of the first copies alone where these are
        more than 1,500 residues.
    """
    mapped = (form_map.place >= 0) & (structure.kind_of_residue == POLYMER)
    if mapped.sum() > MOST_RESIDUES:
        first = np.zeros_like(mapped)
        first[_known(form_map.first_residue)] = True
        mapped &= first
    return np.flatnonzero(mapped)


def _backbone(structure: Structure, residues: NDArray[np.int64]) -> NDArray[np.int64]:
    wanted = np.isin(structure.residue_of_atom, residues)
    wanted &= structure.model_of_atom == structure.model_of_atom.min(initial=0)
    wanted &= np.isin(structure.atom_name, sorted(LETTERS))
    atoms = np.flatnonzero(wanted & first_conformation(structure))
    return atoms[np.argsort(structure.residue_of_atom[atoms], kind="stable")]


# --- units ----------------------------------------------------------------------------


def _unit(
    found: Comparison,
    index: int,
    unit: FormUnit,
    *,
    transforms: list[NDArray[np.float64]],
) -> dict[str, Any]:
    place = place_of_site(found)
    members = [int(p) for p in place[unit.members]]
    return {
        "name": unit.name,
        "members": members,
        "forms": [
            _unit_in_form(unit, form, sites, transform)
            for form, sites, transform in zip(
                found.forms, found.sites, transforms, strict=False
            )
        ],
        "verdict": found.verdicts[index],
    }


def _unit_in_form(
    unit: FormUnit, form: Form, sites: Sites, transform: NDArray[np.float64]
) -> dict[str, Any]:
    """Return where each member stands when the unit is laid out in a form."""
    present = [i for i, m in enumerate(unit.members) if sites.residue[m] >= 0]
    out: dict[str, Any] = {"at": [None] * len(unit.members), "mate": [], "joined": []}
    out["mate"], out["mates"] = [-1] * len(unit.members), []
    if not present:
        return out
    contacts = contacts_within(form.contacts, form.cutoff_angstrom)
    members = unit.members[present]
    laid = lay_out_unit(members, form.structure, sites=sites, contacts=contacts)
    row = {int(unit.members[i]): i for i in present}
    rows = [row[site] for site in laid.site.tolist()]
    mates: list[NDArray[np.float64]] = []
    for i, residue, own in zip(rows, laid.residue, laid.transform, strict=True):
        anchor = moved_points(anchor_of(form.structure, int(residue))[None], own)
        out["at"][i] = hundredths(moved_points(anchor, transform))
        out["mate"][i] = _number(mates, own)
    for matrix, (operator, shift) in zip(
        mates, _operators(form, laid, mates), strict=True
    ):
        turned = transform @ matrix @ np.linalg.inv(transform)
        numbers = np.round(turned[:3], 6).ravel().tolist()
        out["mates"].append({"matrix": numbers, "printed": operator, "shift": shift})
    out["joined"] = _joined(form, contacts, laid, rows)
    return out


def _number(mates: list[NDArray[np.float64]], matrix: NDArray[np.float64]) -> int:
    if same_motion(matrix, np.eye(4)):
        return -1
    for index, known in enumerate(mates):
        if same_motion(matrix, known):
            return index
    mates.append(matrix)
    return len(mates) - 1


def _operators(
    form: Form, laid: UnitLayout, mates: list[NDArray[np.float64]]
) -> list[tuple[str, list[int]]]:
    crystal = form.structure.crystal
    out = []
    for matrix in mates:
        which = next(
            i for i, own in enumerate(laid.transform) if same_motion(own, matrix)
        )
        operator = int(laid.operator[which])
        triplet = crystal.triplets[operator] if crystal and operator >= 0 else ""
        out.append((pretty_operator(triplet), laid.shift[which].tolist()))
    return out


def _joined(
    form: Form, contacts: Contacts, laid: UnitLayout, rows: list[int]
) -> list[list[int]]:
    """Return the pairs of members that touch where they are laid out, and the kind."""
    at = {int(r): i for i, r in enumerate(laid.residue)}
    inside = np.isin(contacts.residue_1, laid.residue)
    inside &= np.isin(contacts.residue_2, laid.residue)
    pairs: dict[tuple[int, int], int] = {}
    for contact in np.flatnonzero(inside).tolist():
        first = at[int(contacts.residue_1[contact])]
        second = at[int(contacts.residue_2[contact])]
        put = laid.transform[first] @ contact_matrix(form.structure, contacts, contact)
        if first != second and same_motion(put, laid.transform[second]):
            key = min(rows[first], rows[second]), max(rows[first], rows[second])
            kind = int(contacts.kind[contact])
            pairs[key] = min(kind, pairs.get(key, kind))
    return [[*key, kind] for key, kind in sorted(pairs.items())]


# --- view -----------------------------------------------------------------------------


def _opening_view(drawn: list[dict[str, Any]]) -> dict[str, Any]:
    """Return the view along the shortest axis of the first form; copies may be cut."""
    threads = [
        np.reshape(form["xyz"], (-1, 3))[np.repeat(form["first"], form["atoms"]) == 1]
        / 100
        for form in drawn
    ]
    first = threads[0] - threads[0].mean(axis=0)
    axes = np.linalg.svd(first, full_matrices=False)[2]
    axes *= np.array([_sign(axis) for axis in axes])[:, None]
    axes[2] = np.cross(axes[0], axes[1])
    seen = np.concatenate(threads) @ axes.T
    low, high = seen.min(axis=0), seen.max(axis=0)
    half = (high - low) / 2 + MARGIN_ANGSTROM
    return {
        "centre": np.round(axes.T @ ((low + high) / 2), 4).tolist(),
        "quaternion": np.round(
            Rotation.from_matrix(axes).as_quat(canonical=True), 4
        ).tolist(),
        "half_width": round(float(half[0]), 3),
        "half_height": round(float(half[1]), 3),
        "depth": round(float(half[2]), 3),
    }


def _sign(axis: NDArray[np.float64]) -> float:
    return 1.0 if axis[np.argmax(np.abs(np.round(axis, 6)))] > 0 else -1.0
