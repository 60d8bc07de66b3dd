"""How often the units found are right, and how often the verdicts are, with bounds.

Run as ``python -m tests.benchmarks.calibration``. Prints a row for each set of problems
with a known answer: from the generator in `tests.planted_problems`, and, when
STRUCTMAP_PLANTED names a folder with ``planted.py`` and ``score.py``, from that one
too, there through the files that ``structmap.analyse`` writes. Bounds that are not met
are marked. ``--seeds`` sets how many problems a structure each row has.
"""

import argparse
import contextlib
import importlib.util
import os
import sys
import tempfile
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
from numpy.typing import NDArray

import structmap
from structmap.behaviour import Measurements
from structmap.motional_units import find_motional_units
from structmap.significance import Effort, Judgement, judge_units
from tests.planted_problems import (
    Ground,
    Plan,
    Problem,
    Score,
    plant,
    read_ground,
    score,
)

DATA = Path(__file__).parent.parent / "data"
FILES = ("1orc.pdb", "4cup.cif.gz", "1gbt.cif.gz", "4zhl.cif.gz")
SUPPORTED = ("supported", "beyond-gradient")


@dataclass(frozen=True, slots=True, kw_only=True)
class Bounds:
    """What a row must reach; None where nothing is asked."""

    rand_index: float | None = None
    recall: float | None = None
    power: float | None = None
    any_unit: float | None = None
    false_supported: float = 0.06
    gain: float | None = None


ROWS: tuple[tuple[Plan, Bounds], ...] = (
    (
        Plan(n_points=10, effect=3.0, field=False),
        Bounds(rand_index=0.90),
    ),
    (
        Plan(n_points=10, effect=3.0, field=True),
        Bounds(rand_index=0.75),
    ),
    (
        Plan(n_points=10, effect=5.0, field=False),
        Bounds(rand_index=0.90, recall=0.90, power=0.75, gain=0.05),
    ),
    (
        Plan(n_points=10, effect=5.0, field=True),
        Bounds(rand_index=0.90, recall=0.90, power=0.38, gain=0.15),
    ),
    (
        Plan(n_points=10, effect=8.0, field=False),
        Bounds(rand_index=0.92, power=0.75),
    ),
    (
        Plan(n_points=10, effect=8.0, field=True),
        Bounds(rand_index=0.92, power=0.38),
    ),
    (Plan(n_points=1, effect=3.0, field=False), Bounds(rand_index=0.55)),
    (Plan(n_points=1, effect=3.0, field=True), Bounds()),
    (
        Plan(n_points=1, effect=5.0, field=False),
        Bounds(rand_index=0.85, power=0.65, gain=0.05),
    ),
    (
        Plan(n_points=1, effect=5.0, field=True),
        Bounds(rand_index=0.70, power=0.33, gain=0.15),
    ),
    (
        Plan(n_points=1, effect=8.0, field=False),
        Bounds(rand_index=0.92, power=0.85),
    ),
    (
        Plan(n_points=1, effect=8.0, field=True),
        Bounds(rand_index=0.90, power=0.65),
    ),
    *(
        (
            Plan(n_points=points, effect=5.0, field=field, kind="null"),
            Bounds(any_unit=0.08, false_supported=0.03),
        )
        for points in (1, 10)
        for field in (False, True)
    ),
    *(
        (
            Plan(n_points=points, effect=5.0, field=False, kind="scatter"),
            Bounds(false_supported=0.10),
        )
        for points in (1, 10)
    ),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What came of one problem."""

    rand_index: float
    edge_filter: float
    n_true: int
    n_matched: int
    n_shown: int
    n_false: int
    false_shown: bool
    any_unit: bool
    p_any: float
    membership: tuple[tuple[float, bool], ...]


def solve(ground: Ground, problem: Problem, seed: int, effort: Effort) -> Outcome:
    """Search and judge one problem and hold the answer against the truth."""
    found = find_motional_units(to_measurements(problem), ground.graph, ground.centres)
    judged = judge_units(
        found, ground.graphs, rng=np.random.default_rng(seed), effort=effort
    )
    scored = score(problem.unit, found.label + 1)
    plain = score(problem.unit, found.behaviour.edge_filter_unit)
    shown = {k + 1 for k, u in enumerate(judged.units) if u.verdict in SUPPORTED}
    return Outcome(
        rand_index=scored.rand_index,
        edge_filter=plain.rand_index,
        n_true=scored.n_true,
        n_matched=len(scored.matched),
        n_shown=sum(unit in shown for unit in scored.matched.values()),
        n_false=len(scored.false),
        false_shown=any(unit in shown for unit in scored.false),
        any_unit=scored.n_found > 0,
        p_any=judged.p_any,
        membership=memberships(problem, judged, scored),
    )


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
    with tempfile.TemporaryDirectory() as folder:
        ground = read_ground(DATA / name, Path(folder))
    return [solve(ground, plant(ground, plan, seed), seed, effort) for seed in seeds]


def summarise(outcomes: list[Outcome]) -> dict[str, float]:
    """Return the figures of a row."""
    n_true = max(1, sum(one.n_true for one in outcomes))
    pairs = np.array([pair for one in outcomes for pair in one.membership], float)
    mean = {
        key: float(np.mean([float(getattr(one, key)) for one in outcomes]))
        for key in ("rand_index", "edge_filter", "any_unit", "n_false")
    }
    return mean | {
        "recall": sum(one.n_matched for one in outcomes) / n_true,
        "power": sum(one.n_shown for one in outcomes) / n_true,
        "false_supported": float(np.mean([one.false_shown for one in outcomes])),
        "gain": mean["rand_index"] - mean["edge_filter"],
        "p_any_05": float(np.mean([one.p_any <= 0.05 for one in outcomes])),
        "membership_error": calibration_error(pairs),
    }


def calibration_error(pairs: NDArray[np.float64]) -> float:
    """Return the expected calibration error over tenths; NaN without any pair."""
    if not len(pairs):
        return float("nan")
    tenth = np.minimum((pairs[:, 0] * 10).astype(int), 9)
    off = [
        abs(float((pairs[tenth == k, 0] - pairs[tenth == k, 1]).sum()))
        for k in range(10)
    ]
    return sum(off) / len(pairs)


def missed(figures: dict[str, float], bounds: Bounds) -> list[str]:
    """Return the figures that fall short of their bounds."""
    out = [
        key
        for key in ("rand_index", "recall", "power", "gain")
        if (least := getattr(bounds, key)) is not None and figures[key] < least
    ]
    for key in ("any_unit", "false_supported"):
        most = getattr(bounds, key)
        if most is not None and figures[key] > most:
            out.append(key)
    return out


def describe(plan: Plan) -> str:
    """Return what a row holds, in a few words."""
    rest = "field" if plan.field else "quiet"
    return f"{plan.kind:8} K {plan.n_points:2} E {plan.effect:g} {rest}"


def print_row(name: str, figures: dict[str, float], short: list[str]) -> None:
    """Print one row of the table."""
    columns = (
        "rand_index",
        "edge_filter",
        "recall",
        "power",
        "n_false",
        "any_unit",
        "false_supported",
        "p_any_05",
        "membership_error",
    )
    cells = " ".join(f"{figures.get(key, float('nan')):11.3f}" for key in columns)
    print(f"{name:24} {cells}  {'MISSED ' + ', '.join(short) if short else ''}")
    sys.stdout.flush()


# --- the outside generator ------------------------------------------------------------


def load(path: Path) -> ModuleType:
    """Load a script as a module by its path."""
    spec = importlib.util.spec_from_file_location(path.stem, path)
    if spec is None or spec.loader is None:
        raise SystemExit(f"{path}: cannot be loaded")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def run_outside(
    name: str, plan: Plan, seeds: tuple[int, ...], scripts: str
) -> list[dict[str, Any]]:
    """Plant, analyse through files and score, all with the outside scripts."""
    planted, scorer = (
        load(Path(scripts) / f"{part}.py") for part in ("planted", "score")
    )
    graph = planted.SiteGraph(DATA / name)
    out = []
    for seed in seeds:
        with tempfile.TemporaryDirectory() as parent:
            folder = Path(parent)
            planted.write(
                graph, planted.plant(graph, **outside_choices(plan, seed)), folder
            )
            settings = structmap.Settings(seed=seed)
            result = structmap.analyse(DATA / name, folder / "values.csv", settings)
            result.save(folder / "out")
            one = scorer.problem_score(folder)
            one["edge"] = scorer.problem_score(folder, column="edge_filter_unit")["ari"]
            out.append(one)
    return out


def outside_choices(plan: Plan, seed: int) -> dict[str, Any]:
    """Return the same plan in the words of the outside generator."""
    return {
        "seed": seed,
        "k": plan.n_points,
        "effect": plan.effect,
        "units": 0 if plan.kind == "null" else plan.n_units,
        "mode": "scatter" if plan.kind == "scatter" else "chain",
        "bg": int(plan.field),
    }


def summarise_outside(scores: list[dict[str, Any]]) -> dict[str, float]:
    """Return the figures of a row from the outside scores."""
    n_true = max(1, sum(one["true"] for one in scores))
    rand_index = float(np.mean([one["ari"] for one in scores]))
    edge = float(np.mean([one["edge"] for one in scores]))
    shown = sum((one["power"] or 0) * one["true"] for one in scores)
    pairs = np.array([pair for one in scores for pair in one["membership"]], float)
    return {
        "rand_index": rand_index,
        "edge_filter": edge,
        "gain": rand_index - edge,
        "recall": sum(one["matched"] for one in scores) / n_true,
        "power": shown / n_true,
        "n_false": float(np.mean([one["false"] for one in scores])),
        "any_unit": float(np.mean([one["found"] > 0 for one in scores])),
        "false_supported": float(
            np.mean([one["false_supported"] > 0 for one in scores])
        ),
        "membership_error": calibration_error(pairs),
    }


@contextlib.contextmanager
def workers(count: int) -> Iterator[Any]:
    """Yield a map over processes, or the plain one for a single worker."""
    if count <= 1:
        yield map
        return
    with ProcessPoolExecutor(count) as pool:
        yield pool.map


def main(arguments: list[str] | None = None) -> int:
    """Print the table; return 1 when a bound is missed."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--seeds", type=int, default=12, help="problems a structure")
    parser.add_argument("--first-seed", type=int, default=1)
    parser.add_argument("--only", default="", help="rows whose name holds this text")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--most-permutations", type=int, default=9999)
    parser.add_argument("--repeats", type=int, default=100)
    given = parser.parse_args(arguments)
    seeds = tuple(range(given.first_seed, given.first_seed + given.seeds))
    effort = Effort(most_permutations=given.most_permutations, repeats=given.repeats)
    scripts = os.environ.get("STRUCTMAP_PLANTED", "")
    failed = False
    with workers(given.workers) as each:
        for plan, bounds in ROWS:
            if given.only not in describe(plan):
                continue
            job = partial(run_file, plan=plan, seeds=seeds, effort=effort)
            figures = summarise([one for part in each(job, FILES) for one in part])
            short = missed(figures, bounds)
            print_row(describe(plan), figures, short)
            failed |= bool(short)
            if scripts:
                outside = partial(run_outside, plan=plan, seeds=seeds, scripts=scripts)
                parts = each(outside, FILES)
                figures = summarise_outside([one for part in parts for one in part])
                short = missed(figures, bounds)
                print_row("  outside generator", figures, short)
                failed |= bool(short)
    return int(failed)


if __name__ == "__main__":
    raise SystemExit(main())
