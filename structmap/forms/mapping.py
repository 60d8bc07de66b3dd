"""Which residue of one form is which of another, by sequence."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.forms.errors import DifferentProteinError
from structmap.records import store_read_only
from structmap.sites import Sites
from structmap.sites.alignment import align_sequences
from structmap.structure import POLYMER, Structure, one_letter

LEAST_IDENTITY = 0.7
LEAST_COVER = 0.5


@dataclass(frozen=True, slots=True, kw_only=True)
class Reference:
    """The measured chains that other forms are laid on.

    Attributes
    ----------
    name : str
        File that they come from.
    chains : tuple of str
        Author names.
    sequences : tuple of str
        One letter a residue, observed or not.
    offsets : tuple of int
        First place of each chain when all are put in one row; one more at the end.
    """

    name: str
    chains: tuple[str, ...]
    sequences: tuple[str, ...]
    offsets: tuple[int, ...]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FormMap:
    """Residues of a form laid on the places of the measured chains.

    Attributes
    ----------
    place : ndarray of int, shape (n_residues,)
        Place in the reference, -1 for none.
    first_residue : ndarray of int, shape (n_places,)
        Residue of the first chain on each place, -1 where nothing is modelled.
    n_mutations : int
        Places with another residue than the reference has, in first copies.
    """

    place: NDArray[np.int64]
    first_residue: NDArray[np.int64]
    n_mutations: int

    def __post_init__(self) -> None:
        store_read_only(self, "place", np.int64, (None,))
        store_read_only(self, "first_residue", np.int64, (None,))


def reference_of(structure: Structure, sites: Sites) -> Reference:
    """Return the measured chains of the form in which units were found.

    Parameters
    ----------
    structure : Structure
        Its coordinates.
    sites : Sites
        The measured sites.

    Returns
    -------
    Reference
        Chains that hold the first copy of a site, in the order of the file.
    """
    first = sites.residue[sites.residue >= 0]
    copies = np.unique(structure.copy_of_residue[first]).tolist()
    sequences = tuple(_sequence(structure, copy) for copy in copies)
    offsets = np.concatenate([[0], np.cumsum([len(text) for text in sequences])])
    return Reference(
        name=structure.name,
        chains=tuple(structure.chain_copies[copy].auth_asym_id for copy in copies),
        sequences=sequences,
        offsets=tuple(offsets.tolist()),
    )


def _sequence(structure: Structure, copy: int) -> str:
    names = structure.chain_copies[copy].sequence
    return "".join(one_letter(name)[:1] for name in names)


def map_form(structure: Structure, reference: Reference) -> FormMap:
    """Lay the residues of a form on the measured chains.

    Parameters
    ----------
    structure : Structure
        The form.
    reference : Reference
        The measured chains.

    Returns
    -------
    FormMap
        Chains are laid on the measured chain whose sequence they have, several on one
        where the form has several.

    Raises
    ------
    DifferentProteinError
        If no chain agrees in seven of ten residues with a measured one.

    Notes
    -----
    By alignment of the full sequences, never by residue numbers: files number the same
    protein differently.
    """
    place = np.full(len(structure.kind_of_residue), -1)
    first_residue = np.full(reference.offsets[-1], -1)
    taken = np.zeros(len(reference.chains), dtype=np.int64)
    best_seen, mutations = 0.0, 0
    for copy in range(len(structure.chain_copies)):
        sequence = _sequence(structure, copy)
        fits = [_fit(sequence, other) for other in reference.sequences]
        best_seen = max(best_seen, *(fit.identity for fit in fits))
        chosen = _choose(
            structure.chain_copies[copy].auth_asym_id, fits, reference, taken
        )
        if chosen < 0:
            continue
        own = _residues_of(structure, copy)
        target = fits[chosen].target[_places_in_sequence(structure, own)]
        own, target = own[target >= 0], target[target >= 0]
        place[own] = target + reference.offsets[chosen]
        new = first_residue[place[own]] < 0
        first_residue[place[own][new]] = own[new]
        mutations += fits[chosen].n_different if not taken[chosen] else 0
        taken[chosen] += 1
    if not taken.any():
        raise DifferentProteinError(structure.name, reference.name, best_seen)
    return FormMap(place=place, first_residue=first_residue, n_mutations=mutations)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Fit:
    """A sequence on another: the place of each letter, -1 for none."""

    identity: float
    n_different: int
    target: NDArray[np.int64]


def _fit(sequence: str, other: str) -> _Fit:
    target = np.full(len(sequence), -1)
    if sequence == other:
        return _Fit(identity=1.0, n_different=0, target=np.arange(len(sequence)))
    pairs = align_sequences(sequence, other).pairs
    target[pairs[:, 0]] = pairs[:, 1]
    letters = [(sequence[one], other[two]) for one, two in pairs.tolist()]
    known = [pair for pair in letters if "X" not in pair]
    same = sum(one == two for one, two in known)
    covered = len(pairs) >= LEAST_COVER * min(len(sequence), len(other))
    identity = same / len(known) if known and covered else 0.0
    return _Fit(identity=identity, n_different=len(known) - same, target=target)


def _choose(
    name: str, fits: Sequence[_Fit], reference: Reference, taken: NDArray[np.int64]
) -> int:
    """Return the measured chain to lay a chain on, -1 for none.

    Of equally good ones that of the same name, else that which has fewest so far.
    """
    ranked = sorted(
        range(len(fits)),
        key=lambda k: (-fits[k].identity, reference.chains[k] != name, taken[k], k),
    )
    return ranked[0] if fits[ranked[0]].identity >= LEAST_IDENTITY else -1


def _residues_of(structure: Structure, copy: int) -> NDArray[np.int64]:
    chosen = structure.copy_of_residue == copy
    return np.flatnonzero(chosen & (structure.kind_of_residue == POLYMER))


def _places_in_sequence(
    structure: Structure, residues: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Return the places of residues in the full sequence, counted from 0."""
    numbers = structure.label_seq_id[residues]
    if (numbers < 1).any():
        return np.arange(len(residues))  # the sequence is what is modelled
    return numbers - 1


def sites_in_form(sites: Sites, reference_map: FormMap, form_map: FormMap) -> Sites:
    """Return the measured sites with their copies in another form.

    Parameters
    ----------
    sites : Sites
        In the form in which they were measured.
    reference_map, form_map : FormMap
        Of that form and of the other one.

    Returns
    -------
    Sites
        The same sites in the same order; those that the other form does not model have
        no residue.
    """
    place = np.where(sites.residue >= 0, reference_map.place[sites.residue], -1)
    on_place = np.flatnonzero(form_map.place >= 0)
    order = on_place[np.argsort(form_map.place[on_place], kind="stable")]
    start = np.searchsorted(form_map.place[order], place, side="left")
    count = np.searchsorted(form_map.place[order], place, side="right") - start
    count = np.where(place >= 0, count, 0)
    copy_site = np.repeat(np.arange(len(place)), count)
    within = np.arange(len(copy_site)) - np.repeat(np.cumsum(count) - count, count)
    first = np.where(count > 0, order[np.minimum(start, len(order) - 1)], -1)
    return Sites(
        name=sites.name,
        row=sites.row,
        residue=first,
        atom=sites.atom,
        copy_site=copy_site,
        copy_residue=order[start[copy_site] + within],
        chains=(),
        mismatches=(),
        unmatched=(),
        notes=(),
    )
