"""Reading the folders of earlier analyses."""

import csv
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import (
    Contacts,
    choose_assemblies,
    contact_cutoff,
    find_contacts,
)
from structmap.errors import FileProblemError
from structmap.records import store_read_only
from structmap.sites import Sites
from structmap.structure import (
    LIGAND,
    Assembly,
    Structure,
    read_structure,
    residue_label,
)

MADE_ANGSTROM = 4.0
BROKEN_ANGSTROM = 5.0
CA_ONLY_WIDER_ANGSTROM = 1.5
REMEDY = "name folders that structmap analyse wrote"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Form:
    """One coordinate file with the contacts that decide about units.

    Attributes
    ----------
    name : str
        Name of the coordinate file.
    structure : Structure
        Its coordinates.
    assemblies : tuple of Assembly
        Those whose contacts are `complex`.
    contacts : Contacts
        Up to the distance at which a contact counts as broken.
    cutoff_angstrom : float
        At which residues touch, as in its own analysis.
    made_angstrom, broken_angstrom : float
        A contact is made up to the first and broken beyond the second.
    """

    name: str
    structure: Structure
    assemblies: tuple[Assembly, ...]
    contacts: Contacts
    cutoff_angstrom: float
    made_angstrom: float = MADE_ANGSTROM
    broken_angstrom: float = BROKEN_ANGSTROM


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FormUnit:
    """A motional unit of the form that was measured.

    Attributes
    ----------
    name : str
        ``U1``, ``U2``, …
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    """

    name: str
    members: NDArray[np.int64]

    def __post_init__(self) -> None:
        store_read_only(self, "members", np.int64, (None,))


def make_form(
    structure: Structure, settings: dict[str, Any], *, name: str = ""
) -> Form:
    """Return a form from its coordinates.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    settings : dict
        Settings of its analysis by name; of these ``assembly``, ``cutoff_angstrom`` and
        ``ca_cutoff_angstrom`` are used.
    name : str, optional
        Name to show; the file's by default.

    Returns
    -------
    Form
        With all contacts up to 5 Å, or the cutoff where that is longer. Where a file
        holds CA atoms alone, made and broken are the cutoff and 1.5 Å more.
    """
    assemblies = choose_assemblies(structure, settings.get("assembly", "auto"))
    cutoff = contact_cutoff(
        structure,
        cutoff_angstrom=settings.get("cutoff_angstrom", 4.5),
        ca_cutoff_angstrom=settings.get("ca_cutoff_angstrom", 7.5),
    )
    made, broken = MADE_ANGSTROM, BROKEN_ANGSTROM
    if structure.ca_only:
        made, broken = cutoff, cutoff + CA_ONLY_WIDER_ANGSTROM
    reach = max(broken, cutoff)
    return Form(
        name=name or structure.name,
        structure=structure,
        assemblies=assemblies,
        contacts=find_contacts(structure, reach_angstrom=reach, assemblies=assemblies),
        cutoff_angstrom=cutoff,
        made_angstrom=made,
        broken_angstrom=broken,
    )


def read_form(folder: Path) -> Form:
    """Return the form that a folder of an analysis holds.

    Parameters
    ----------
    folder : Path
        What ``structmap analyse`` wrote.

    Returns
    -------
    Form
        From ``mapped.cif`` and ``run.json``.

    Raises
    ------
    FileProblemError
        If one of them is missing or damaged.
    """
    run = _read_run(folder)
    structure = read_structure(_existing(folder / "mapped.cif"))
    names = list(run["inputs_sha256"])
    name = str(names[0]) if names else folder.name
    return make_form(structure, run["settings"], name=name)


def _existing(path: Path) -> Path:
    if not path.is_file():
        raise FileProblemError(path, "is not there", REMEDY)
    return path


def _read_run(folder: Path) -> dict[str, Any]:
    path = _existing(folder / "run.json")
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
        if isinstance(content["settings"], dict) and content["inputs_sha256"]:
            return dict(content)
    except (ValueError, KeyError, TypeError, OSError) as error:
        problem = f"is no run record ({type(error).__name__})"
        raise FileProblemError(path, problem, REMEDY) from error
    raise FileProblemError(path, "is no run record", REMEDY)


def read_units(
    folder: Path, structure: Structure
) -> tuple[Sites, tuple[FormUnit, ...]]:
    """Return the measured sites and the units that an analysis found.

    Parameters
    ----------
    folder : Path
        What ``structmap analyse`` wrote.
    structure : Structure
        The coordinates in it.

    Returns
    -------
    sites : Sites
        From ``sites.csv``, those that have a residue. Atoms of ligands come without
        one, as no sequence says where they are in another form.
    units : tuple of FormUnit
        From ``motional_units.csv``.

    Raises
    ------
    FileProblemError
        If a table is missing or does not fit the coordinates.
    """
    rows = [row for row in _read_rows(folder / "sites.csv", "site") if row["copies"]]
    sites = _make_sites(folder / "sites.csv", rows, structure)
    index = {name: place for place, name in enumerate(sites.name.tolist())}
    path = folder / "motional_units.csv"
    units = []
    for row in _read_rows(path, "motional_unit"):
        names = row["sites"].split()
        if not names or any(name not in index for name in names):
            problem = f"unit {row['motional_unit']} has sites that sites.csv lacks"
            raise FileProblemError(path, problem, REMEDY)
        members = np.array(sorted(index[name] for name in names))
        units.append(FormUnit(name=row["motional_unit"], members=members))
    return sites, tuple(units)


def _read_rows(path: Path, column: str) -> list[dict[str, str]]:
    text = _existing(path).read_text(encoding="utf-8")
    reader = csv.DictReader(text.splitlines())
    if column not in (reader.fieldnames or ()):
        raise FileProblemError(path, f"has no column {column}", REMEDY)
    return [{key: value or "" for key, value in row.items() if key} for row in reader]


def _make_sites(path: Path, rows: list[dict[str, str]], structure: Structure) -> Sites:
    named: dict[str, list[int]] = {}
    for residue in np.flatnonzero(structure.copy_of_residue >= 0).tolist():
        named.setdefault(residue_label(structure, residue), []).append(residue)
    of_ligands = _ligand_labels(structure)
    copies: list[list[int]] = []
    for row in rows:
        labels = row["copies"].split()
        if all(label in of_ligands or _bare(label) in of_ligands for label in labels):
            copies.append([])
            continue
        if any(label not in named for label in labels):
            problem = f"site {row['site']} has a copy that mapped.cif lacks"
            raise FileProblemError(path, problem, REMEDY)
        copies.append([residue for label in labels for residue in named[label]])
    n_sites = len(rows)
    return Sites(
        name=np.array([row["site"] for row in rows], dtype=np.str_),
        row=np.arange(n_sites),
        residue=np.array([(*own, -1)[0] for own in copies], dtype=np.int64),
        atom=np.array([row.get("atom", "") for row in rows], dtype=np.str_),
        copy_site=np.repeat(np.arange(n_sites), [len(own) for own in copies]),
        copy_residue=np.array([r for own in copies for r in own], dtype=np.int64),
        chains=(),
        mismatches=(),
        unmatched=(),
        notes=(),
    )


def _ligand_labels(structure: Structure) -> frozenset[str]:
    ligands = np.flatnonzero(structure.kind_of_residue == LIGAND).tolist()
    return frozenset(residue_label(structure, ligand) for ligand in ligands)


def _bare(label: str) -> str:
    """Return the label of the residue of an atom."""
    return label.rsplit("/", 1)[0]
