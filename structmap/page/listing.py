"""The residues that the page lists: columns of the chain, rows of the table."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only
from structmap.result import AnalysisRecord
from structmap.structure import (
    LIGAND_PART,
    POLYMER,
    Structure,
    one_letter,
    part_atom,
)
from structmap.words import confidence_note, measured_chains


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Listing:
    """Residues of the measured chains in order, those with several sites repeated.

    Attributes
    ----------
    residue : ndarray of int, shape (n_entries,)
        Residue of each entry: the first copy of its site.
    site : ndarray of int, shape (n_entries,)
        Its site, -1 where nothing was measured.
    measured : ndarray of int, shape (n_entries,)
        Its row of the measurements, -1 where it has none.
    first : ndarray of int, shape (n_drawn,)
        For each residue of the polymer and part of a ligand the listed one that it is
        or is a copy of, else -1.
    """

    residue: NDArray[np.int64]
    site: NDArray[np.int64]
    measured: NDArray[np.int64]
    first: NDArray[np.int64]

    def __post_init__(self) -> None:
        for name in ("residue", "site", "measured"):
            store_read_only(self, name, np.int64, (len(self.residue),))
        store_read_only(self, "first", np.int64, (None,))


def list_entries(record: AnalysisRecord) -> Listing:
    """Return the residues that the page lists.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    Listing
        Residues of the measured chains in the order of the coordinates.
    """
    structure = record.structure
    drawn = np.isin(structure.kind_of_residue, (POLYMER, LIGAND_PART))
    polymer = np.flatnonzero(drawn)
    listed = np.isin(structure.auth_asym_id[polymer], measured_chains(record))
    listed &= structure.original_residue[polymer] == polymer
    sites_at: dict[int, list[int]] = {}
    for index, residue in enumerate(record.sites.residue.tolist()):
        sites_at.setdefault(residue, []).append(index)
    pairs = [(r, s) for r in polymer[listed].tolist() for s in sites_at.get(r, [-1])]
    paired = np.array(pairs, dtype=np.int64).reshape(-1, 2)
    residues, site = paired[:, 0], paired[:, 1]
    row_of_site = np.full(len(record.sites.name) + 1, -1)
    row_of_site[record.measurements.site] = np.arange(len(record.measurements.site))
    return Listing(
        residue=residues,
        site=site,
        measured=row_of_site[site],
        first=_first_copies(record, len(polymer), polymer[listed]),
    )


def _first_copies(
    record: AnalysisRecord, n_drawn: int, listed: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Lead each residue back to a listed one: measured copies, then those between."""
    structure, sites = record.structure, record.sites
    first = np.full(n_drawn, -1)
    originals = structure.original_residue[:n_drawn]
    first[listed] = listed
    first[sites.copy_residue] = sites.residue[sites.copy_site]
    for chain in np.unique(structure.copy_of_residue[:n_drawn]):
        members = np.flatnonzero(structure.copy_of_residue[:n_drawn] == chain)
        known = members[(first[members] >= 0) & (first[members] != members)]
        if len(known):
            _fill_between(structure, first, members, known)
    unknown = first < 0
    first[unknown] = first[originals[unknown]]
    return first


def _fill_between(
    structure: Structure,
    first: NDArray[np.int64],
    members: NDArray[np.int64],
    known: NDArray[np.int64],
) -> None:
    """Lay the unmeasured residues of a copy on the listed chain by their numbers."""
    targets = first[known]
    chain = structure.copy_of_residue[targets[0]]
    shifts = structure.auth_seq_id[targets] - structure.auth_seq_id[known]
    shift = int(np.median(shifts))
    places = {
        (int(structure.auth_seq_id[r]), str(structure.ins_code[r])): int(r)
        for r in np.flatnonzero(structure.copy_of_residue == chain)
    }
    for residue in members[first[members] < 0].tolist():
        key = (
            int(structure.auth_seq_id[residue]) + shift,
            str(structure.ins_code[residue]),
        )
        first[residue] = places.get(key, -1)


def residue_names(record: AnalysisRecord, n_drawn: int) -> list[str]:
    """Return the short names of the drawn residues, ``D56A``.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    n_drawn : int
        Number of polymer residues and parts of ligands, which come first.

    Returns
    -------
    list of str
        The chain stands in front when the structure has several.
    """
    structure = record.structure
    several = len(measured_chains(record)) > 1
    names = []
    for r in range(n_drawn):
        of_ligand = structure.kind_of_residue[r] == LIGAND_PART
        component, atom = str(structure.auth_comp_id[r]), part_atom(structure, r)
        text = component if of_ligand else one_letter(component)
        text += f"{structure.auth_seq_id[r]}{structure.ins_code[r]}"
        text += f"\u00a0{atom}" if atom else ""
        names.append(f"{structure.auth_asym_id[r]}\u00a0{text}" if several else text)
    return names


def entry_names(record: AnalysisRecord, listing: Listing) -> list[str]:
    """Return the short name of each entry, with the atom where sites share a residue.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    list of str
        As the sentences have them.
    """
    names = residue_names(record, len(listing.first))
    residues = listing.residue.tolist()
    if len(set(residues)) == len(residues):
        return [names[r] for r in residues]
    atoms = [str(record.sites.atom[s]) if s >= 0 else "" for s in listing.site.tolist()]
    kind = record.structure.kind_of_residue
    return [
        f"{names[r]}\u00a0{a}" if a and kind[r] == POLYMER else names[r]
        for r, a in zip(residues, atoms, strict=True)
    ]


def entry_letters(record: AnalysisRecord, listing: Listing) -> list[str]:
    """Return what stands for each entry along the chain.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    list of str
        One letter a residue; for an atom of a ligand its element.
    """
    structure = record.structure
    letters = []
    for residue in listing.residue.tolist():
        if part_atom(structure, residue):
            own = structure.residue_of_atom == residue
            letters.append(str(structure.element[own][0]))
        else:
            letters.append(one_letter(str(structure.auth_comp_id[residue])))
    return letters


def entry_components(record: AnalysisRecord, listing: Listing) -> list[str]:
    """Return the name of the component of each entry.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    list of str
        ``Lys`` for a residue, ``HEM`` for a ligand.
    """
    structure = record.structure
    names = structure.auth_comp_id[listing.residue].tolist()
    of_ligand = structure.kind_of_residue[listing.residue] == LIGAND_PART
    return [
        name if ligand else name.capitalize()
        for name, ligand in zip(names, of_ligand.tolist(), strict=True)
    ]


def entry_notes(record: AnalysisRecord, listing: Listing) -> list[str]:
    """Return the note of each entry: why it has no value, what is odd about it.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    list of str
        Blank where there is nothing to say.
    """
    fringe: dict[int, list[str]] = {}
    for unit in record.units:
        for site in unit.fringe.tolist():
            fringe.setdefault(site, []).append(unit.name)
    notes = []
    for site, row in zip(listing.site.tolist(), listing.measured.tolist(), strict=True):
        if site < 0:
            notes.append("not measured")
        elif row < 0:
            notes.append("in the table, but with too few values to compare or left out")
        else:
            notes.append(
                "; ".join(f"at the edge of {name}" for name in fringe.get(site, []))
            )
    return [
        "; ".join(filter(None, (note, confidence_note(record, residue))))
        for note, residue in zip(notes, listing.residue.tolist(), strict=True)
    ]
