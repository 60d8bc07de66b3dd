"""Which constant offset, or which alignment, lays measured residues on a chain."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import betaln

from structmap.records import store_read_only
from structmap.sites.alignment import align_sequences
from structmap.sites.families import Chain
from structmap.sites.residue_names import UNKNOWN, letter_of

LARGEST_OFFSET = 200
NOWHERE = -1
# Names decide when so many residues have one that both sides know.
_FEWEST_NAMES = 5
# An alignment with gaps must beat a constant offset by so much, and more for each gap.
_GAIN_OF_ALIGNMENT = 2
# Prolines are avoided on purpose when so few would be hit by chance with a probability
# below this, over all offsets that lay nearly as many residues as the best.
_CHANCE_OF_AVOIDING = 0.01
_NEARLY_AS_MANY = 0.8
_LONGEST_GAP = 60


class MeasuredResidue(NamedTuple):
    """A residue as the value table names it.

    Attributes
    ----------
    number : int
    ins_code : str
    name : str
        Blank when the table names none.
    """

    number: int
    ins_code: str
    name: str


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Laying:
    """Measured residues laid on one chain.

    Attributes
    ----------
    offset : int
        Added to the table's numbers; for an alignment, the most frequent difference.
    position : ndarray of int, shape (n_residues,)
        Position on the chain of each measured residue, -1 outside its sequence.
    n_inside, n_observed : int
        Residues inside the sequence; those of them that have coordinates.
    n_named, n_agreeing : int
        Residues with a name that can be compared; those whose names agree.
    n_proline : int
        Residues laid on a proline.
    is_constant : bool
        Whether one offset holds for all.
    """

    offset: int
    position: NDArray[np.int64]
    n_inside: int
    n_observed: int
    n_named: int
    n_agreeing: int
    n_proline: int
    is_constant: bool

    def __post_init__(self) -> None:
        store_read_only(self, "position", np.int64, (None,))

    @property
    def score(self) -> int:
        """Return how many more names agree than do not.

        Returns
        -------
        int
            Names that agree less names that do not.
        """
        return 2 * self.n_agreeing - self.n_named


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class NamesInPlay:
    """Names and letters of the measured residues and of a chain.

    Attributes
    ----------
    number : ndarray of int, shape (n_residues,)
    table_name, table_letter : ndarray of str, shape (n_residues,)
        Blank, and ``X``, where the table names none.
    chain_letter : ndarray of str, shape (n_positions,)
    """

    number: NDArray[np.int64]
    table_name: NDArray[np.str_]
    table_letter: NDArray[np.str_]
    chain_letter: NDArray[np.str_]

    def __post_init__(self) -> None:
        store_read_only(self, "number", np.int64, (None,))
        for name in ("table_name", "table_letter", "chain_letter"):
            store_read_only(self, name, np.str_, (None,))


def lay_by_offset(
    residues: Sequence[MeasuredResidue], chain: Chain, offset: int
) -> Laying:
    """Lay measured residues on a chain by adding a constant to their numbers.

    Parameters
    ----------
    residues : sequence of MeasuredResidue
        As the table names them.
    chain : Chain
        Where they are laid.
    offset : int
        Added to the numbers of the table.

    Returns
    -------
    Laying
        Where they come to lie.
    """
    position = _positions(residues, chain, [offset])[0]
    return lay_at(names_in_play(residues, chain), chain, position, offset=offset)


def names_in_play(residues: Sequence[MeasuredResidue], chain: Chain) -> NamesInPlay:
    """Return names and letters of both sides.

    Parameters
    ----------
    residues : sequence of MeasuredResidue
        As the table names them.
    chain : Chain
        Where they are laid.

    Returns
    -------
    NamesInPlay
        As arrays.
    """
    return NamesInPlay(
        number=np.array([residue.number for residue in residues]),
        table_name=np.array([residue.name for residue in residues], dtype=np.str_),
        table_letter=np.array([letter_of(residue.name) for residue in residues]),
        chain_letter=np.array(list(chain.letters)),
    )


def lay_at(
    names: NamesInPlay,
    chain: Chain,
    position: NDArray[np.int64],
    *,
    offset: int | None = None,
) -> Laying:
    """Count what a laying gets right.

    Parameters
    ----------
    names : NamesInPlay
        Names and letters of both sides.
    chain : Chain
        Where they are laid.
    position : ndarray of int, shape (n_residues,)
        Position on the chain of each measured residue, -1 outside its sequence.
    offset : int or None
        The constant offset that led there; None takes the most frequent difference.

    Returns
    -------
    Laying
        The positions with their counts.
    """
    laid = np.flatnonzero(position >= 0)
    at = position[laid]
    steps = (chain.number[at] - names.number[laid]).tolist()
    if offset is None:
        offset = Counter(sorted(steps)).most_common(1)[0][0] if steps else 0
    same = (names.table_name[laid] == chain.name[at]) & (chain.name[at] != "")
    here, there = names.table_letter[laid], names.chain_letter[at]
    judged = same | ((here != UNKNOWN) & (there != UNKNOWN))
    return Laying(
        offset=offset,
        position=position,
        n_inside=len(laid),
        n_observed=int((chain.residue[at] >= 0).sum()),
        n_named=int(judged.sum()),
        n_agreeing=int((judged & (same | (here == there))).sum()),
        n_proline=int((there == "P").sum()),
        is_constant=len(set(steps)) <= 1,
    )


def lay_by_names(residues: Sequence[MeasuredResidue], chain: Chain) -> list[Laying]:
    """Lay named residues on a chain, best first.

    Parameters
    ----------
    residues : sequence of MeasuredResidue
        As the table names them.
    chain : Chain
        Where they are laid.

    Returns
    -------
    list of Laying
        Every constant offset that makes names agree, by the names that agree less those
        that do not, then residues inside the sequence, then offset 0 first. Where an
        alignment with gaps agrees clearly better, it stands alone.
    """
    names = names_in_play(residues, chain)
    places: dict[str, list[int]] = {}
    for position, letter in enumerate(names.chain_letter.tolist()):
        if letter != UNKNOWN and chain.has_number[position]:
            places.setdefault(letter, []).append(int(chain.number[position]))
    votes = Counter(
        number - residue.number
        for residue, letter in zip(residues, names.table_letter.tolist(), strict=True)
        for number in places.get(letter, ())
    )
    most = max(votes.values(), default=0)
    offsets = sorted({0, *(o for o, n in votes.items() if n >= most / 2)})
    found = _positions(residues, chain, offsets)
    layings = [
        lay_at(names, chain, position, offset=offset)
        for position, offset in zip(found, offsets, strict=True)
    ]
    layings.sort(key=name_rank)
    aligned = _align(residues, chain, names)
    gain = aligned.score - layings[0].score
    laid = np.flatnonzero(aligned.position >= 0)
    n_gaps = len(set((aligned.position[laid] - names.number[laid]).tolist())) - 1
    return [aligned] if gain > _GAIN_OF_ALIGNMENT + 2 * n_gaps else layings


def name_rank(laying: Laying) -> tuple[int, ...]:
    """Return the order of layings by names, best first.

    Parameters
    ----------
    laying : Laying
        The one to rank.

    Returns
    -------
    tuple of int
        Lowest for the best.
    """
    return (-laying.score, -laying.n_inside, int(laying.offset != 0))


def lay_by_numbers(residues: Sequence[MeasuredResidue], chain: Chain) -> list[Laying]:
    """Lay residues on a chain by every constant offset within 200 that reaches it.

    Parameters
    ----------
    residues : sequence of MeasuredResidue
        As the table names them.
    chain : Chain
        Where they are laid.

    Returns
    -------
    list of Laying
        One for each offset.
    """
    offsets = list(range(-LARGEST_OFFSET, LARGEST_OFFSET + 1))
    found = _positions(residues, chain, offsets)
    names = names_in_play(residues, chain)
    return [
        lay_at(names, chain, position, offset=offset)
        for position, offset in zip(found, offsets, strict=True)
        if (position >= 0).any()
    ]


def avoid_prolines(layings: Sequence[Laying], chain: Chain) -> bool:
    """Return whether some offset avoids prolines so well that it is no accident.

    Amide data have no value on proline. Data of another kind have some, and then an
    offset that happens to avoid them says nothing.

    Parameters
    ----------
    layings : sequence of Laying
        On one chain, by offsets.
    chain : Chain
        Where they are laid.

    Returns
    -------
    bool
        True when the values are to be taken for amide data.
    """
    full = full_enough(layings)
    if not full:
        return False
    # n_before[i] prolines stand before position i
    is_proline = np.array([letter == "P" for letter in chain.letters])
    n_before = np.concatenate([[0], np.cumsum(is_proline)])
    placed = [laying.position[laying.position >= 0] for laying in full]
    start = np.array([position.min() for position in placed])
    stop = np.array([position.max() + 1 for position in placed])
    chance = [
        _chance_of_so_few(laying.n_proline, size, n_proline, len(position))
        for laying, size, n_proline, position in zip(
            full, stop - start, n_before[stop] - n_before[start], placed, strict=True
        )
    ]
    return bool(np.min(chance) * len(full) < _CHANCE_OF_AVOIDING)


def _chance_of_so_few(few: int, size: int, n_marked: int, n_drawn: int) -> float:
    """Chance of at most so many marked ones in a draw, by the hypergeometric law."""
    count = np.arange(max(0, n_drawn - (size - n_marked)), few + 1)
    if not len(count):
        return 0.0
    logs = (
        _log_ways(n_marked, count)
        + _log_ways(size - n_marked, n_drawn - count)
        - _log_ways(size, n_drawn)
    )
    possible = (count <= n_marked) & (count <= n_drawn)
    return float(np.exp(logs[possible]).sum())


def _log_ways(n: int, chosen: NDArray[np.int64] | int) -> NDArray[np.float64]:
    """Logarithm of the binomial coefficient."""
    out: NDArray[np.float64] = -np.log1p(n) - betaln(n - chosen + 1, chosen + 1)
    return out


def full_enough(layings: Sequence[Laying]) -> list[Laying]:
    """Return the layings that hold nearly as many residues as the best.

    Parameters
    ----------
    layings : sequence of Laying
        All that were tried.

    Returns
    -------
    list of Laying
        Those with at least 80 % of the most.
    """
    most = max((laying.n_inside for laying in layings), default=0)
    return [laying for laying in layings if laying.n_inside >= _NEARLY_AS_MANY * most]


def number_rank(laying: Laying, *, amide: bool) -> tuple[int, ...]:
    """Return the order of layings by numbers, best first.

    Parameters
    ----------
    laying : Laying
        The one to rank.
    amide : bool
        Whether the values avoid prolines on purpose; then proline decides first.

    Returns
    -------
    tuple of int
        Lowest for the best.
    """
    away = int(laying.offset != 0)
    if amide:
        return (laying.n_proline, -laying.n_inside, away)
    return (-laying.n_inside, away, laying.n_proline)


def names_decide(residues: Sequence[MeasuredResidue]) -> bool:
    """Return whether enough residues are named to go by the names.

    Parameters
    ----------
    residues : sequence of MeasuredResidue
        As the table names them.

    Returns
    -------
    bool
        True from five named residues on, or when all are named.
    """
    n_named = sum(letter_of(residue.name) != UNKNOWN for residue in residues)
    return n_named >= min(_FEWEST_NAMES, len(residues))


def _positions(
    residues: Sequence[MeasuredResidue], chain: Chain, offsets: Sequence[int]
) -> NDArray[np.int64]:
    """Return the position of each residue for each offset, -1 outside."""
    out = np.full((len(offsets), len(residues)), NOWHERE)
    number = np.array([residue.number for residue in residues])
    code = np.array([residue.ins_code for residue in residues], dtype=np.str_)
    for letter in sorted(set(code.tolist())):
        known = np.flatnonzero(chain.has_number & (chain.ins_code == letter))
        if not known.size:
            continue
        low = int(chain.number[known].min())
        table = np.full(int(chain.number[known].max()) - low + 1, NOWHERE)
        table[chain.number[known] - low] = known
        mine = np.flatnonzero(code == letter)
        wanted = number[mine][None, :] + np.asarray(offsets)[:, None] - low
        inside = (wanted >= 0) & (wanted < len(table))
        out[:, mine] = np.where(inside, table[np.clip(wanted, 0, len(table) - 1)], -1)
    return out


def _align(
    residues: Sequence[MeasuredResidue], chain: Chain, names: NamesInPlay
) -> Laying:
    """Align the measured sequence, unmeasured numbers as X, with a chain."""
    order = sorted(range(len(residues)), key=lambda n: residues[n][:2])
    letters: list[str] = []
    column: list[int] = []
    for before, n in zip([order[0], *order], order, strict=False):
        gap = residues[n].number - residues[before].number - 1
        letters += [UNKNOWN] * min(max(gap, 0), _LONGEST_GAP)
        column.append(len(letters))
        letters.append(str(names.table_letter[n]))
    pairs = dict(align_sequences("".join(letters), chain.letters).pairs.tolist())
    position = np.full(len(residues), NOWHERE)
    position[order] = [pairs.get(at, NOWHERE) for at in column]
    return lay_at(names, chain, position)
