"""The figures of a row, and the calibration of probabilities and p values."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import binom

from tests.benchmarks.calibration.outcome import Outcome

LATTICE_WORDS = ("lattice-joined", "lattice-only")
LEVELS = (0.01, 0.05, 0.1)
SURE = 0.95


def summarise(outcomes: Sequence[Outcome]) -> dict[str, float]:
    """Return the figures of a row; shares of units over all problems together."""
    n_true = max(1, sum(one.n_true for one in outcomes))
    n_matched = sum(one.n_matched for one in outcomes)
    mean = {
        name: float(np.mean([float(getattr(one, field)) for one in outcomes]))
        for name, field in (
            ("ari", "rand_index"),
            ("edge_filter", "edge_filter"),
            ("any_unit", "any_unit"),
            ("n_false", "n_false"),
            ("false_shown", "false_shown"),
        )
    }
    pairs = membership_pairs(outcomes)
    return mean | {
        "spread": standard_error([one.rand_index for one in outcomes]),
        "gain": mean["ari"] - mean["edge_filter"],
        "recall": n_matched / n_true,
        "power": sum(one.n_shown for one in outcomes) / n_true,
        "internal": share_called(outcomes, "internal"),
        "lattice": share_called(outcomes, *LATTICE_WORDS),
        "brier": brier_score(pairs),
        "ece": calibration_error(pairs),
    }


def standard_error(values: Sequence[float]) -> float:
    """Return the standard error of a mean; NaN for a single value."""
    if len(values) < 2:
        return float("nan")
    return float(np.std(values, ddof=1) / np.sqrt(len(values)))


def share_called(outcomes: Sequence[Outcome], *words: str) -> float:
    """Return the share of matched units with such a lattice verdict."""
    n_matched = sum(one.n_matched for one in outcomes)
    called = sum(one.words.get(word, 0) for one in outcomes for word in words)
    return called / n_matched if n_matched else float("nan")


def membership_pairs(outcomes: Sequence[Outcome]) -> NDArray[np.float64]:
    """Return all probabilities with their truth and the place of their problem."""
    found = [
        (chance, float(inside), float(place))
        for place, one in enumerate(outcomes)
        for chance, inside in one.membership
    ]
    return np.array(found, float).reshape(-1, 3)


def brier_score(pairs: NDArray[np.float64]) -> float:
    """Return the mean squared difference of probability and truth."""
    if not len(pairs):
        return float("nan")
    return float(np.mean((pairs[:, 0] - pairs[:, 1]) ** 2))


def calibration_error(pairs: NDArray[np.float64]) -> float:
    """Return the expected calibration error over tenths; NaN without any pair."""
    if not len(pairs):
        return float("nan")
    return sum(abs(one.said - one.true) * one.n for one in tenths(pairs)) / len(pairs)


@dataclass(frozen=True, slots=True, kw_only=True)
class Tenth:
    """Sites said to belong with a probability in one tenth, and how many do.

    `error` is the standard error of the difference; sites of one problem stand or fall
    together, so that problems are what it counts (Liang and Zeger, Biometrika 73, 13,
    1986, without their model).
    """

    low: float
    n: int
    said: float
    true: float
    error: float

    @property
    def is_off(self) -> bool:
        """Whether the difference is beyond two standard errors."""
        return abs(self.said - self.true) > 2 * self.error


def tenths(pairs: NDArray[np.float64]) -> list[Tenth]:
    """Sort pairs of probability, truth and problem into tenths of probability."""
    place = np.minimum((pairs[:, 0] * 10).astype(int), 9)
    out = []
    for k in np.unique(place).tolist():
        inside = pairs[place == k]
        off = inside[:, 0] - inside[:, 1]
        problem = inside[:, 2].astype(int) if inside.shape[1] > 2 else None
        sums = np.bincount(problem, weights=off) if problem is not None else off
        out.append(
            Tenth(
                low=k / 10,
                n=len(inside),
                said=float(inside[:, 0].mean()),
                true=float(inside[:, 1].mean()),
                error=float(np.sqrt(np.sum(sums**2)) / len(inside)),
            )
        )
    return out


@dataclass(frozen=True, slots=True, kw_only=True)
class Level:
    """How many of n problems without units have a p value of at most a level.

    More than `most` would come in less than 5 % of such sets when each has the chance
    that its level says (binomial, one-sided).
    """

    level: float
    n: int
    found: int
    most: int

    @property
    def is_kept(self) -> bool:
        """Whether no more are found than chance allows."""
        return self.found <= self.most


def levels(p_values: Sequence[float]) -> list[Level]:
    """Count p values at or below each level."""
    n = len(p_values)
    return [
        Level(
            level=level,
            n=n,
            found=sum(p <= level for p in p_values),
            most=int(binom.ppf(SURE, n, level)),
        )
        for level in LEVELS
    ]
