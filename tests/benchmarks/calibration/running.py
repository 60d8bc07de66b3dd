"""Problems solved one after the other, or over processes, each noted as it is done."""

import contextlib
import multiprocessing
import os
import time
from collections.abc import Iterable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from pathlib import Path
from typing import TextIO

from structmap.analysis import compute
from structmap.significance import Effort
from tests.benchmarks.calibration.outcome import Done, Job, to_line
from tests.benchmarks.calibration.outside import solve_outside
from tests.benchmarks.calibration.own import solve_own
from tests.benchmarks.calibration.rows import ROWS, Row

THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")


@dataclass(frozen=True, slots=True, kw_only=True)
class Work:
    """What is the same for all problems of a run."""

    most_permutations: int
    repeats: int
    scripts: str = ""


def jobs_of(
    rows: Iterable[Row],
    generators: Sequence[str],
    *,
    first: int,
    planted: int,
    nulls: int,
) -> Iterator[Job]:
    """Yield the problems of rows, all structures of a seed before the next."""
    for row in rows:
        for seed in row.seeds(first, planted=planted, nulls=nulls):
            for generator in generators:
                for file in row.files:
                    yield Job(generator=generator, row=row.name, file=file, seed=seed)


def run_job(job: Job, work: Work) -> Done:
    """Make and solve one problem."""
    row = next(row for row in ROWS if row.name == job.row)
    effort = Effort(most_permutations=work.most_permutations, repeats=work.repeats)
    start = time.perf_counter()
    if job.generator == "own":
        outcome = solve_own(row, job.file, job.seed, effort)
    else:
        scripts = Path(work.scripts)
        outcome = solve_outside(row, job.file, job.seed, effort, scripts=scripts)
    return Done(job=job, outcome=outcome, seconds=time.perf_counter() - start)


def run_jobs(
    jobs: Sequence[Job], work: Work, *, workers: int, keep: Path | None
) -> Iterator[Done]:
    """Run problems and yield them as they are done, each noted before."""
    with contextlib.ExitStack() as stack:
        notes = stack.enter_context(open_notes(keep)) if keep else None
        found = (
            run_over_processes(jobs, work, workers)
            if workers > 1
            else (run_job(job, work) for job in jobs)
        )
        for done in found:
            if notes:
                notes.write(to_line(done) + "\n")
                notes.flush()
            yield done


def open_notes(keep: Path) -> TextIO:
    """Open a file to go on with; a line that was cut short is removed."""
    if keep.exists():
        text = keep.read_text(encoding="utf-8")
        whole = text[: text.rfind("\n") + 1]
        if whole != text:
            keep.write_text(whole, encoding="utf-8")
    return keep.open("a", encoding="utf-8")


def run_over_processes(jobs: Sequence[Job], work: Work, workers: int) -> Iterator[Done]:
    """Run problems side by side; processes start anew so that each has one thread."""
    os.environ.update(dict.fromkeys(THREADS, "1"))
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(
        workers, mp_context=context, initializer=use_one_thread
    ) as pool:
        waiting = [pool.submit(run_job, job, work) for job in jobs]
        try:
            for future in as_completed(waiting):
                yield future.result()
        finally:
            pool.shutdown(wait=False, cancel_futures=True)


def use_one_thread() -> None:
    """Let an analysis use one thread: the processes fill the machine already."""
    compute.WORKERS = 1
