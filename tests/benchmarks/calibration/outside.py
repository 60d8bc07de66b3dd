"""Problems from an outside generator, answered through files and scored from them."""

import csv
import functools
import importlib.util
import tempfile
from pathlib import Path
from types import ModuleType
from typing import Any

import structmap
from structmap.files import write_folder
from structmap.significance import Effort
from structmap.tables import sites_table, table_text, units_table
from tests.benchmarks.calibration.outcome import Outcome
from tests.benchmarks.calibration.rows import CUTOFF_ANGSTROM, DATA, FILES, Row
from tests.planted_problems import Plan


@functools.cache
def load(path: Path) -> ModuleType:
    """Load a script as a module by its path."""
    spec = importlib.util.spec_from_file_location(path.stem, path)
    if spec is None or spec.loader is None:
        raise SystemExit(f"{path}: cannot be loaded")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@functools.cache
def graph_of(scripts: Path, file: str) -> Any:
    """Return the outside generator's own graph of a structure, once in a process."""
    return load(scripts / "planted.py").SiteGraph(DATA / file)


def solve_outside(
    row: Row, file: str, seed: int, effort: Effort, *, scripts: Path
) -> Outcome | None:
    """Plant, analyse through files and score; None where there is no room."""
    planted, graph = load(scripts / "planted.py"), graph_of(scripts, file)
    try:
        problem = planted.plant(graph, **choices_of(row.plan, seed))
    except ValueError:
        return None
    with tempfile.TemporaryDirectory() as parent:
        folder = Path(parent)
        planted.write(graph, problem, folder)
        answer(DATA / file, folder, settings_of(row, seed, effort))
        scorer = load(scripts / "score.py")
        scored = scorer.problem_score(folder)
        edge = scorer.problem_score(folder, column="edge_filter_unit")["ari"]
        chances = read_chances(folder / "out" / "motional_units.csv")
    return to_outcome(scored, edge, chances)


def choices_of(plan: Plan, seed: int) -> dict[str, Any]:
    """Return a plan in the words of the outside generator."""
    return {
        "seed": seed,
        "k": plan.n_points,
        "effect": plan.effect,
        "units": 0 if plan.kind == "null" else plan.n_units,
        "mode": plan.kind if plan.kind in ("scatter", "lattice") else "chain",
        "bg": int(plan.field),
        "misreport": plan.misreport,
    }


def settings_of(row: Row, seed: int, effort: Effort) -> structmap.Settings:
    """Return the settings of a row; those beside another leave the tests out."""
    cutoff = row.cutoff_angstrom if row.files == FILES else CUTOFF_ANGSTROM
    return structmap.Settings(
        seed=seed,
        cutoff_angstrom=cutoff,
        most_permutations=0 if row.against else effort.most_permutations,
        repeats=effort.repeats,
    )


def answer(coordinates: Path, folder: Path, settings: structmap.Settings) -> None:
    """Analyse values.csv of a folder and write the two tables that are scored."""
    record = structmap.analyse(coordinates, folder / "values.csv", settings).record
    tables = {"sites.csv": sites_table, "motional_units.csv": units_table}
    write_folder(
        folder / "out", {name: table_text(of(record)) for name, of in tables.items()}
    )


def read_chances(path: Path) -> tuple[float, float]:
    """Return p_any and the smallest p_place of a written table; 1 without units."""
    with path.open(newline="", encoding="utf-8") as lines:
        rows = list(csv.DictReader(lines))
    any_chance, place = (
        min((float(row[name]) for row in rows if row[name]), default=1.0)
        for name in ("p_any", "p_place")
    )
    return any_chance, place


def to_outcome(
    scored: dict[str, Any], edge: float, chances: tuple[float, float]
) -> Outcome:
    """Return the score of the outside judge in our words."""
    return Outcome(
        rand_index=scored["ari"],
        edge_filter=edge,
        n_true=scored["true"],
        n_matched=scored["matched"],
        n_shown=round((scored["power"] or 0) * scored["true"]),
        n_false=scored["false"],
        false_shown=scored["false_supported"] > 0,
        any_unit=scored["found"] > 0,
        p_any=chances[0],
        p_place=chances[1],
        words=dict(scored["words"]),
        membership=tuple((p, bool(inside)) for p, inside in scored["membership"]),
    )
