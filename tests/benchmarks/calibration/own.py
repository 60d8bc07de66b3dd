"""Problems from the repository's own generator, solved by the functions themselves."""

import functools
import tempfile
from pathlib import Path

import numpy as np

from structmap.behaviour import Measurements
from structmap.lattice import verdict_by_graph
from structmap.motional_units import UnitSearch, find_motional_units
from structmap.significance import Effort, Judgement, cutoffs_to_vary, judge_units
from tests.benchmarks.calibration.outcome import Outcome
from tests.benchmarks.calibration.rows import CUTOFF_ANGSTROM, DATA, Row
from tests.planted_problems import (
    Ground,
    NoRoomError,
    Plan,
    Problem,
    Score,
    plant,
    read_ground,
    score,
)

SUPPORTED = ("supported", "beyond-gradient")


def solve_own(row: Row, file: str, seed: int, effort: Effort) -> Outcome | None:
    """Make and solve one problem of a row; None where there is no room for it."""
    ground = ground_of(file)
    try:
        problem = plant(ground, row.plan, seed)
    except NoRoomError:
        return None
    if row.against:
        return solve_plainly(ground, problem, row.cutoff_angstrom)
    return solve(ground, problem, seed, effort)


@functools.cache
def ground_of(file: str) -> Ground:
    """Read a structure once in each process."""
    with tempfile.TemporaryDirectory() as folder:
        return read_ground(DATA / file, Path(folder))


def solve(ground: Ground, problem: Problem, seed: int, effort: Effort) -> Outcome:
    """Search and judge one problem and hold the answer against the truth."""
    found = find_motional_units(to_measurements(problem), ground.graph, ground.centres)
    graphs = tuple(
        ground.graph_at(cutoff)
        for cutoff in cutoffs_to_vary(
            ground.cutoff_angstrom, ca_only=ground.structure.ca_only
        )
    )
    judged = judge_units(found, graphs, rng=np.random.default_rng(seed), effort=effort)
    return compare(ground, problem, found, judged)


def solve_plainly(ground: Ground, problem: Problem, cutoff: float) -> Outcome:
    """Search at another cutoff, without the tests of chance."""
    graph = ground.graph_at(cutoff)
    found = find_motional_units(to_measurements(problem), graph, ground.centres)
    return compare(ground, problem, found, None)


def compare(
    ground: Ground, problem: Problem, found: UnitSearch, judged: Judgement | None
) -> Outcome:
    """Hold an answer against the truth."""
    scored = score(problem.unit, found.label + 1)
    plain = score(problem.unit, found.behaviour.edge_filter_unit)
    units = judged.units if judged else ()
    shown = {k + 1 for k, u in enumerate(units) if u.verdict in SUPPORTED}
    return Outcome(
        rand_index=scored.rand_index,
        edge_filter=plain.rand_index,
        n_true=scored.n_true,
        n_matched=len(scored.matched),
        n_shown=sum(unit in shown for unit in scored.matched.values()),
        n_false=len(scored.false),
        false_shown=any(unit in shown for unit in scored.false),
        any_unit=scored.n_found > 0,
        p_any=judged.p_any if judged else 1.0,
        p_place=min((u.p_place for u in units), default=1.0),
        words=lattice_words(ground, found, scored),
        membership=memberships(problem, judged, scored) if judged else (),
    )


def lattice_words(ground: Ground, found: UnitSearch, scored: Score) -> dict[str, int]:
    """Count what is said to hold the matched units together."""
    words = [
        verdict_by_graph(found.members[unit - 1], ground.graph)
        for unit in scored.matched.values()
    ]
    return {word: words.count(word) for word in sorted(set(words))}


def to_measurements(problem: Problem) -> Measurements:
    """Return the values of a problem as they are compared."""
    n_points = len(problem.x)
    n_kept = n_points if n_points > 1 else 0
    return Measurements(
        site=problem.site,
        value=problem.value,
        error=np.repeat(problem.error[:, None], n_points, axis=1),
        column=tuple(f"value at {x:g}" for x in problem.x),
        is_profile=n_points > 1,
        part="whole",
        errors_given=True,
        point_kept=np.ones(n_kept, bool),
        point_reason=("",) * n_kept,
        notes=(),
    )


def memberships(
    problem: Problem, judged: Judgement, scored: Score
) -> tuple[tuple[float, bool], ...]:
    """Pair each probability of belonging to a matched unit with the truth."""
    return tuple(
        (float(chance), bool(problem.unit[row] == true))
        for true, unit in scored.matched.items()
        for row, chance in enumerate(judged.units[unit - 1].membership)
        if chance > 0
    )


def run_file(
    name: str, plan: Plan, seeds: tuple[int, ...], effort: Effort
) -> list[Outcome]:
    """Solve the problems of one structure."""
    row = Row(name="", plan=plan, bounds=(), cutoff_angstrom=CUTOFF_ANGSTROM)
    found = [solve_own(row, name, seed, effort) for seed in seeds]
    return [one for one in found if one is not None]
