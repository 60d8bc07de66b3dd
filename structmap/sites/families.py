"""Chains of one sequence, their positions laid on each other."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.records import store_read_only
from structmap.sites.alignment import align_sequences
from structmap.sites.residue_names import letter_of
from structmap.structure import Structure

# Two chains are copies of one molecule when at least this share of the positions of
# the shorter have a partner, and this share of the partners agree; common practice.
_SHARE_PAIRED = 0.8
_SHARE_AGREEING = 0.95
# Without a common numbering, a short peptide could be found by chance in a long chain.
_SHARE_OF_LONGER = 0.5
NO_RESIDUE = -1


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Chain:
    """One chain of the coordinates along its full sequence.

    Attributes
    ----------
    copy : int
        Index into ``chain_copies`` of the structure.
    auth_asym_id, label_asym_id : str
    number : ndarray of int, shape (n_positions,)
        Author's number; where a position has no coordinates, as its neighbours tell.
    has_number : ndarray of bool, shape (n_positions,)
        False where they cannot tell.
    ins_code : ndarray of str, shape (n_positions,)
    residue : ndarray of int, shape (n_positions,)
        Index of the residue, -1 where it has no coordinates.
    name : ndarray of str, shape (n_positions,)
        Component names.
    """

    copy: int
    auth_asym_id: str
    label_asym_id: str
    number: NDArray[np.int64]
    has_number: NDArray[np.bool_]
    ins_code: NDArray[np.str_]
    residue: NDArray[np.int64]
    name: NDArray[np.str_]

    def __post_init__(self) -> None:
        n_positions = len(self.number)
        store_read_only(self, "number", np.int64, (n_positions,))
        store_read_only(self, "has_number", np.bool_, (n_positions,))
        store_read_only(self, "residue", np.int64, (n_positions,))
        for name in ("ins_code", "name"):
            store_read_only(self, name, np.str_, (n_positions,))

    @property
    def letters(self) -> str:
        """Return the sequence in one-letter codes.

        Returns
        -------
        str
            A letter a position.
        """
        return "".join(letter_of(str(name)) for name in self.name)

    def label(self, position: int) -> str:
        """Return chain, number and insertion code of a position.

        Parameters
        ----------
        position : int
            Position in the sequence.

        Returns
        -------
        str
            Such as ``A/56A``.
        """
        return f"{self.auth_asym_id}/{self.number[position]}{self.ins_code[position]}"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Family:
    """Chains of one sequence on common positions.

    Attributes
    ----------
    chains : tuple of Chain
        All of one length: position i is the same residue of the molecule in each.
    """

    chains: tuple[Chain, ...]


def find_families(structure: Structure) -> tuple[Family, ...]:
    """Group the polymer chains of a structure by their sequences.

    Parameters
    ----------
    structure : Structure
        The coordinates.

    Returns
    -------
    tuple of Family
        In the order of the file; NCS copies are left out, since they hold nothing that
        their originals do not.
    """
    groups: list[list[tuple[Chain, NDArray[np.int64]]]] = []
    for copy, chain_copy in enumerate(structure.chain_copies):
        if chain_copy.ncs:
            continue
        chain = _read_chain(structure, copy)
        for group in groups:
            partner = _partners(structure, group[0][0], chain)
            if partner is not None:
                group.append((chain, partner))
                break
        else:
            groups.append([(chain, np.arange(len(chain.number)))])
    return tuple(_on_common_positions(group) for group in groups)


def _read_chain(structure: Structure, copy: int) -> Chain:
    """Lay the residues of a chain on its full sequence."""
    chain_copy = structure.chain_copies[copy]
    residues = np.flatnonzero(structure.copy_of_residue == copy)
    sequence: Sequence[str] = chain_copy.sequence
    position = structure.label_seq_id[residues] - 1
    inside = (position >= 0) & (position < len(sequence))
    if not inside.all() or len(set(position.tolist())) < len(position):
        sequence = [str(name) for name in structure.auth_comp_id[residues]]
        position = np.arange(len(residues))
    residue = np.full(len(sequence), NO_RESIDUE)
    residue[position] = residues
    name = np.array([str(name) for name in sequence], dtype="<U16")
    name[position] = structure.auth_comp_id[residues]
    ins_code = np.full(len(sequence), "", dtype="<U4")
    ins_code[position] = structure.ins_code[residues]
    number = np.zeros(len(sequence), dtype=np.int64)
    number[position] = structure.auth_seq_id[residues]
    has_number = residue != NO_RESIDUE
    _extend_numbers(number, has_number)
    return Chain(
        copy=copy,
        auth_asym_id=chain_copy.auth_asym_id,
        label_asym_id=chain_copy.label_asym_id,
        number=number,
        has_number=has_number,
        ins_code=ins_code,
        residue=residue,
        name=name,
    )


def _extend_numbers(number: NDArray[np.int64], has_number: NDArray[np.bool_]) -> None:
    """Give numbers, in place, to positions without coordinates.

    The neighbours tell: ends are counted on; inside, the count goes on from the residue
    before while it stays below the residue after.
    """
    known = np.flatnonzero(has_number)
    if not known.size:
        return
    for position in range(known[0] - 1, -1, -1):
        number[position] = number[position + 1] - 1
    has_number[: known[0]] = True
    for before, after in zip(known, [*known[1:], len(number)], strict=True):
        limit = number[after] if after < len(number) else np.iinfo(np.int64).max
        for position in range(before + 1, after):
            number[position] = number[position - 1] + 1
            has_number[position] = number[position] < limit


def _partners(
    structure: Structure, first: Chain, other: Chain
) -> NDArray[np.int64] | None:
    """Return the position of `first` for each of `other`; None if unlike."""
    of_first, of_other = (structure.chain_copies[c.copy] for c in (first, other))
    if of_first.polymer_type != of_other.polymer_type:
        return None
    if (
        len(first.number) == len(other.number)
        and of_first.sequence == of_other.sequence
    ):
        return np.arange(len(other.number))
    by_number = _partners_by_number(first, other)
    if _are_copies(first, other, by_number, share_of_longer=0.0):
        return by_number
    common = sum((Counter(first.letters) & Counter(other.letters)).values())
    shorter = min(len(first.number), len(other.number))
    if common < _SHARE_PAIRED * _SHARE_AGREEING * shorter:
        return None
    partner = np.full(len(other.number), NO_RESIDUE)
    pairs = align_sequences(first.letters, other.letters).pairs
    partner[pairs[:, 1]] = pairs[:, 0]
    alike = _are_copies(first, other, partner, share_of_longer=_SHARE_OF_LONGER)
    return partner if alike else None


def _partners_by_number(first: Chain, other: Chain) -> NDArray[np.int64]:
    places = {key: position for position, key in enumerate(_keys(first)) if key}
    return np.array(
        [places.get(key, NO_RESIDUE) if key else -1 for key in _keys(other)]
    )


def _keys(chain: Chain) -> list[tuple[int, str] | None]:
    return [
        (int(number), str(code)) if known else None
        for number, code, known in zip(
            chain.number, chain.ins_code, chain.has_number, strict=True
        )
    ]


def _are_copies(
    first: Chain, other: Chain, partner: NDArray[np.int64], *, share_of_longer: float
) -> bool:
    """Return whether paired positions are many enough and agree in name."""
    seen = (partner >= 0) & (other.residue >= 0)
    seen[seen] &= first.residue[partner[seen]] >= 0
    n_paired = int(seen.sum())
    lengths = sorted(int((chain.residue >= 0).sum()) for chain in (first, other))
    if n_paired < max(_SHARE_PAIRED * lengths[0], share_of_longer * lengths[1], 1):
        return False
    agreeing = first.name[partner[seen]] == other.name[seen]
    return bool(agreeing.mean() >= _SHARE_AGREEING)


def _on_common_positions(group: list[tuple[Chain, NDArray[np.int64]]]) -> Family:
    """Spread the chains of a group over common positions.

    Positions that the first chain lacks (a file that states no sequence) are added at
    the end, with the number that the first chain would have there.
    """
    first = group[0][0]
    extra: dict[tuple[int, str], tuple[int, str]] = {}  # key: (position, name)
    laid: list[tuple[Chain, NDArray[np.int64], int]] = []
    for chain, partner in group:
        paired = partner != NO_RESIDUE
        steps = chain.number[paired] - first.number[partner[paired]]
        shift = int(np.median(steps)) if paired.any() else 0
        place = partner.copy()
        for position in np.flatnonzero(~paired):
            number = int(chain.number[position]) - shift
            key = (number, str(chain.ins_code[position]))
            at = len(first.number) + len(extra)
            place[position] = extra.setdefault(key, (at, str(chain.name[position])))[0]
        laid.append((chain, place, shift))
    return Family(chains=tuple(_spread(*one, first, extra) for one in laid))


def _spread(
    chain: Chain,
    place: NDArray[np.int64],
    shift: int,
    first: Chain,
    extra: dict[tuple[int, str], tuple[int, str]],
) -> Chain:
    """Return a chain over the common positions of its family.

    What the chain itself does not say of a position is as in the first chain.
    """
    n_first = len(first.number)
    n_positions = n_first + len(extra)
    number = np.zeros(n_positions, dtype=np.int64)
    ins_code = np.full(n_positions, "", dtype="<U4")
    name = np.full(n_positions, "", dtype="<U16")
    has_number = np.zeros(n_positions, dtype=bool)
    residue = np.full(n_positions, NO_RESIDUE)
    number[:n_first], has_number[:n_first] = first.number + shift, first.has_number
    ins_code[:n_first], name[:n_first] = first.ins_code, first.name
    for (first_number, code), (at, called) in extra.items():
        number[at], ins_code[at], name[at] = first_number + shift, code, called
        has_number[at] = True
    number[place], ins_code[place] = chain.number, chain.ins_code
    name[place], has_number[place] = chain.name, chain.has_number
    residue[place] = chain.residue
    return Chain(
        copy=chain.copy,
        auth_asym_id=chain.auth_asym_id,
        label_asym_id=chain.label_asym_id,
        number=number,
        has_number=has_number,
        ins_code=ins_code,
        residue=residue,
        name=name,
    )
