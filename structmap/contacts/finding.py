"""Finding all contacts of the polymer residues, over the whole crystal."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from structmap.contacts.assemblies import assembly_frames
from structmap.contacts.group import GroupTable, element_matrix, make_group_table
from structmap.contacts.images import candidate_images
from structmap.contacts.kinds import kinds_of_contacts
from structmap.contacts.mates import Mate, mates_of_assemblies
from structmap.contacts.record import Contacts
from structmap.contacts.search import (
    LONGEST_BOND_ANGSTROM,
    LONGEST_CA_STEP_ANGSTROM,
    Molecule,
    ResiduePairs,
    join_pairs,
    no_pairs,
    polymer_atoms,
)
from structmap.structure import Assembly, Structure, residue_confidence

Progress = Callable[[float], object]

Name = tuple[int, int, int, int, str]
"""Operator, shift, and the label of a mate that only an assembly makes."""

IDENTITY: Name = (0, 0, 0, 0, "")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Image:
    """One image to search: what makes it, and what it and its inverse are called."""

    matrix: NDArray[np.float64]
    self_inverse: bool
    name: Name
    inverse_name: Name
    allowed: NDArray[np.bool_] | None = None


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class _Found:
    """Pairs with ``first <= second``; the second stands in the named image."""

    pairs: ResiduePairs
    share: NDArray[np.float64]
    place: NDArray[np.int64]
    names: tuple[Name, ...]


def find_contacts(
    structure: Structure,
    *,
    reach_angstrom: float,
    assemblies: Sequence[Assembly],
    residues: NDArray[np.bool_] | None = None,
    progress: Progress | None = None,
) -> Contacts:
    """Find every contact of polymer residues, in the molecule and over the crystal.

    Measured parts of ligands take part as residues do; see `part_residues`.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    reach_angstrom : float
        Largest distance between heavy atoms, above 0.
    assemblies : sequence of Assembly
        Assemblies whose contacts are `complex`; see `choose_assemblies`.
    residues : ndarray of bool, shape (n_residues,), optional
        Residues that take part, both ends of a contact; all by default.
    progress : callable, optional
        Called with the share done, 0 to 1.

    Returns
    -------
    Contacts
        Each contact once, sorted by (residue_1, residue_2, operator, shift).

    Raises
    ------
    ValueError
        If the reach is not above 0.
    CrowdedCellError
        If a million images overlap with the molecule.

    Notes
    -----
    Two atoms may touch if either has no alternate-conformation letter or both have the
    same. A residue touching its own image is a contact; atoms within 0.8 Å of their own
    image are one atom on a symmetry element and do not touch it. Residues that the
    chain joins by a bond are in contact although their letters disagree.

    Every image that can come within reach is searched, one of an operator and its
    inverse. Without a crystal these are the molecule itself and the mates of the
    assemblies. Of an ensemble, a contact is as long as the ceil(n_models / 2)-th
    shortest of its distances over the models, so that one within the reach is so in at
    least half of them.
    """
    if not reach_angstrom > 0:
        raise ValueError(f"reach_angstrom is {reach_angstrom}; it must be above 0")
    everything = np.ones(len(structure.kind_of_residue), dtype=np.bool_)
    taken = everything if residues is None else residues
    table = None if structure.crystal is None else make_group_table(structure.crystal)
    frames = assembly_frames(structure, assemblies)
    mates = mates_of_assemblies(structure, frames, reach_angstrom=reach_angstrom)
    images = [
        *_crystal_images(structure, table, reach_angstrom),
        *(_mate_image(mate) for mate in mates),
    ]
    found = _search(structure, taken, reach_angstrom, images, progress)
    elements = np.array([name[:4] for name in found.names], dtype=np.int64)
    kind = kinds_of_contacts(
        structure.copy_of_residue[found.pairs.first],
        structure.copy_of_residue[found.pairs.second],
        place=found.place,
        elements=elements,
        frames=frames,
        table=table,
    )
    return _sorted_contacts(structure, found, kind, reach_angstrom)


def _crystal_images(
    structure: Structure, table: GroupTable | None, reach_angstrom: float
) -> list[_Image]:
    crystal = structure.crystal
    if crystal is None or table is None:
        return []
    operators, shifts = candidate_images(
        structure, crystal, table, reach_angstrom=reach_angstrom
    )
    images = []
    for element, inverse in zip(
        np.column_stack([operators, shifts]).tolist(),
        np.column_stack(table.inverse(operators, shifts)).tolist(),
        strict=True,
    ):
        images.append(
            _Image(
                matrix=element_matrix(crystal, element[0], np.array(element[1:])),
                self_inverse=element == inverse,
                name=(*element, ""),
                inverse_name=(*inverse, ""),
            )
        )
    return images


def _mate_image(mate: Mate) -> _Image:
    return _Image(
        matrix=mate.matrix,
        self_inverse=mate.self_inverse,
        name=(-1, 0, 0, 0, mate.label),
        inverse_name=(-1, 0, 0, 0, mate.inverse_label),
        allowed=mate.allowed,
    )


def _search(
    structure: Structure,
    taken: NDArray[np.bool_],
    reach_angstrom: float,
    images: Sequence[_Image],
    progress: Progress | None,
) -> _Found:
    """Search the molecule itself and its images, model by model."""
    per_model = []
    for model in range(structure.n_models):
        per_model.append(_search_model(structure, model, taken, reach_angstrom, images))
        if progress is not None:
            progress((model + 1) / structure.n_models)
    pairs, share = _over_models(per_model)
    here = [IDENTITY, *(image.name for image in images)]
    there = [IDENTITY, *(image.inverse_name for image in images)]
    names = sorted({*here, *there})
    rank = {name: index for index, name in enumerate(names)}
    forward = np.array([rank[name] for name in here])[pairs.image]
    backward = np.array([rank[name] for name in there])[pairs.image]
    same = pairs.first == pairs.second
    flipped = (pairs.first > pairs.second) | (same & (backward < forward))
    return _Found(
        pairs=pairs.seen_from_second(flipped),
        share=share,
        place=np.where(flipped, backward, forward),
        names=tuple(names),
    )


def _search_model(
    structure: Structure,
    model: int,
    taken: NDArray[np.bool_],
    reach_angstrom: float,
    images: Sequence[_Image],
) -> ResiduePairs:
    if not polymer_atoms(structure, model, residues=taken).size:
        return no_pairs()
    molecule = Molecule(
        structure, model=model, reach_angstrom=reach_angstrom, residues=taken
    )
    own = molecule.own_pairs()
    if not images:
        return own
    found = molecule.image_pairs(
        np.array([image.matrix for image in images]),
        self_inverse=np.array([image.self_inverse for image in images]),
    )
    keep = np.ones(len(found.image), dtype=np.bool_)
    for index, image in enumerate(images, start=1):
        if image.allowed is not None:
            copy_1 = structure.copy_of_residue[found.first]
            copy_2 = structure.copy_of_residue[found.second]
            keep &= (found.image != index) | image.allowed[copy_1, copy_2]
    return join_pairs([own, found.at(np.flatnonzero(keep))])


def _over_models(
    per_model: Sequence[ResiduePairs],
) -> tuple[ResiduePairs, NDArray[np.float64]]:
    """Return each pair at the distance that half of the models reach."""
    if len(per_model) == 1:
        return per_model[0], np.ones(len(per_model[0].first))
    needed = (len(per_model) + 1) // 2
    pairs = join_pairs(per_model)
    model = np.repeat(
        np.arange(len(per_model)), [len(part.first) for part in per_model]
    )
    which = np.column_stack([pairs.image, pairs.first, pairs.second])
    order = np.lexsort((pairs.distance_angstrom, *which.T[::-1]))
    new = np.diff(which[order], axis=0, prepend=-1).any(axis=1)
    start = np.flatnonzero(new)
    count = np.diff(start, append=len(order))
    in_first_model = np.where(model[order] == 0, pairs.n_atom_pairs[order], 0)
    atom_pairs = np.add.reduceat(in_first_model, start) if start.size else start
    often = count >= needed
    median = order[start[often] + needed - 1]
    kept = replace(pairs.at(median), n_atom_pairs=atom_pairs[often])
    return kept, count[often] / len(per_model)


def _confidence(structure: Structure, found: _Found) -> NDArray[np.float64]:
    """Return the lower confidence of each pair; NaN where a bond joins the two."""
    first, second = found.pairs.first, found.pairs.second
    if not structure.is_predicted:
        return np.full(len(first), np.nan)
    each = residue_confidence(structure)
    longest = LONGEST_CA_STEP_ANGSTROM if structure.ca_only else LONGEST_BOND_ANGSTROM
    copy = structure.copy_of_residue
    bonded = (second == first + 1) & (copy[first] == copy[second])
    bonded &= found.place == found.names.index(IDENTITY)
    bonded &= found.pairs.distance_angstrom <= longest
    return np.where(bonded, np.nan, np.minimum(each[first], each[second]))


def _sorted_contacts(
    structure: Structure,
    found: _Found,
    kind: NDArray[np.int64],
    reach_angstrom: float,
) -> Contacts:
    pairs = found.pairs
    order = np.lexsort((found.place, pairs.second, pairs.first))
    place = found.place[order]
    elements = np.array([name[:4] for name in found.names], dtype=np.int64)
    labels = np.array([name[4] for name in found.names], dtype=np.str_)
    return Contacts(
        reach_angstrom=reach_angstrom,
        residue_1=pairs.first[order],
        residue_2=pairs.second[order],
        operator=elements[place, 0],
        shift=elements[place, 1:],
        assembly_operator=labels[place],
        kind=kind[order],
        distance_angstrom=pairs.distance_angstrom[order],
        atom_1=pairs.atom_1[order],
        atom_2=pairs.atom_2[order],
        n_atom_pairs=pairs.n_atom_pairs[order],
        share_of_models=found.share[order],
        confidence=_confidence(structure, found)[order],
    )
