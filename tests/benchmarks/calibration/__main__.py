"""How often the units found are right, and how often the verdicts are, with bounds.

Run as ``python -m tests.benchmarks.calibration``. Prints a row for each set of problems
with a known answer: from the generator in `tests.planted_problems`, and, when
STRUCTMAP_PLANTED names a folder with ``planted.py`` and ``score.py``, from that one
too, there through the files that an analysis writes. Bounds that are not met are
marked. ``--keep FILE`` writes each problem there as it is done; a run with the same
file goes on where it stopped, with the same code and effort.
"""

import argparse
import os
import sys
from pathlib import Path

from tests.benchmarks.calibration.outcome import Done, from_line
from tests.benchmarks.calibration.rows import ROWS
from tests.benchmarks.calibration.running import Work, jobs_of, run_jobs
from tests.benchmarks.calibration.table import lines_of, missing_of, print_lines


def parser() -> argparse.ArgumentParser:
    """Return the options."""
    options = argparse.ArgumentParser(description=(__doc__ or "").split("\n")[0])
    options.add_argument(
        "--seeds", type=int, default=12, help="planted problems a structure in each row"
    )
    options.add_argument(
        "--nulls",
        type=int,
        default=30,
        help="problems without units, or with strewn movers, a structure in each row",
    )
    options.add_argument("--first-seed", type=int, default=1)
    options.add_argument("--only", default="", help="rows whose name holds this text")
    options.add_argument(
        "--generator",
        choices=("own", "outside"),
        help="one of them; both when left out",
    )
    options.add_argument("--keep", type=Path, help="file to note each problem in")
    options.add_argument(
        "--table", action="store_true", help="only print what --keep holds"
    )
    options.add_argument("--workers", type=int, default=2)
    options.add_argument("--most-permutations", type=int, default=9999)
    options.add_argument("--repeats", type=int, default=100)
    return options


def read_kept(path: Path | None) -> list[Done]:
    """Return what a file of an earlier run holds; a line cut short is left out."""
    if path is None or not path.exists():
        return []
    lines = path.read_text(encoding="utf-8").splitlines(keepends=True)
    return [from_line(line) for line in lines if line.endswith("\n")]


def main(arguments: list[str] | None = None) -> int:
    """Print the table; return 1 when a bound is missed."""
    given = parser().parse_args(arguments)
    scripts = os.environ.get("STRUCTMAP_PLANTED", "")
    generators = [
        name
        for name in ("own", *(("outside",) if scripts or given.table else ()))
        if given.generator in (None, name)
    ]
    rows = [row for row in ROWS if given.only in row.name]
    done = read_kept(given.keep)
    if not given.table:
        work = Work(
            most_permutations=given.most_permutations,
            repeats=given.repeats,
            scripts=scripts,
        )
        jobs = jobs_of(
            rows,
            generators,
            first=given.first_seed,
            planted=given.seeds,
            nulls=given.nulls,
        )
        left = list(missing_of(jobs, done))
        for one in run_jobs(left, work, workers=given.workers, keep=given.keep):
            done.append(one)
            say_progress(one, len(left))
    lines, kept = lines_of(done, generators, rows)
    print_lines(lines)
    return int(not kept)


def say_progress(one: Done, n_left: int) -> None:
    """Name the problem that is done, on the way of messages."""
    job = one.job
    text = f"{job.generator} {job.row} {job.file} {job.seed}: {one.seconds:.1f} s"
    print(f"{text} (of {n_left})", file=sys.stderr, flush=True)


if __name__ == "__main__":
    raise SystemExit(main())
