"""What came of one problem, the same for both generators, and as a line of JSON."""

import json
from dataclasses import asdict, dataclass
from typing import Any


@dataclass(frozen=True, slots=True, kw_only=True)
class Job:
    """One problem of one row."""

    generator: str
    row: str
    file: str
    seed: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What came of one problem.

    `n_shown` counts matched true units that are called supported or beyond-gradient;
    `words` the lattice verdicts of the matched units; `membership` pairs the
    probability that a site belongs to a matched unit with the truth. Without the tests
    of chance the p values are 1.
    """

    rand_index: float
    edge_filter: float
    n_true: int
    n_matched: int
    n_shown: int
    n_false: int
    false_shown: bool
    any_unit: bool
    p_any: float
    p_place: float
    words: dict[str, int]
    membership: tuple[tuple[float, bool], ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Done:
    """A job with its outcome; None where the structure has no room for such units."""

    job: Job
    outcome: Outcome | None
    seconds: float


def to_line(done: Done) -> str:
    """Return one line of JSON."""
    return json.dumps(asdict(done))


def from_line(line: str) -> Done:
    """Return what `to_line` wrote."""
    read: dict[str, Any] = json.loads(line)
    outcome = read["outcome"]
    if outcome is not None:
        pairs = tuple((chance, inside) for chance, inside in outcome["membership"])
        outcome = Outcome(**outcome | {"membership": pairs})
    return Done(job=Job(**read["job"]), outcome=outcome, seconds=read["seconds"])
