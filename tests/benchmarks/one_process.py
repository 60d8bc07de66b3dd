"""Calibration and speed of the test of one process; run by hand.

Usage: python -m tests.benchmarks.one_process [groups] [replicates]; with 0 groups only
the times.
"""

import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

import numpy as np

from structmap.one_process import (
    Profiles,
    TestOptions,
    fit_each,
    judge_group,
    make_profiles,
)
from structmap.one_process.cpmg import cpmg_model, exact_cpmg
from structmap.one_process.exchange import TwoSites, exact_r1rho, exchange_r1rho_model
from tests.one_process.demo import MODEL
from tests.one_process.simulated import CASES, Case, run_case

TRAIN, LOCK = np.geomspace(50, 1000, 12), np.geomspace(100, 3000, 12)


def calibrate(n_groups: int, n_replicates: int) -> None:
    """Print coverage, rejections and verdicts of all cases."""
    print("case | covered | p_param | both p | verdicts")
    for number, case in enumerate(CASES):
        found = run_case(
            case, n_groups=n_groups, n_replicates=n_replicates, seed=100 + number
        )
        shown = f"{found.covered:.3f}" if np.isfinite(case.truth) else "-"
        verdicts = ", ".join(f"{n} {share:.3f}" for n, share in found.verdicts.items())
        print(
            f"{case.name} | {shown} | {found.parametric:.3f} | {found.both:.3f} | "
            f"{verdicts}",
            flush=True,
        )


def clock() -> None:
    """Print the times of the jobs that users wait for, beside bare imports."""
    imports = "import gemmi, numpy, scipy, pandas"
    start = time.perf_counter()
    subprocess.run([sys.executable, "-c", imports], check=True)
    bare = time.perf_counter() - start
    print(f"{imports}: {bare:.2f} s")
    rng = np.random.default_rng(1)
    group = Case("twelve", kinetics=False, values=(1e-5,) * 12).draw(rng)
    many = Case("many", kinetics=False, values=(1e-5,) * 250).draw(rng)
    options = TestOptions(n_border=999)
    jobs = {
        "mas-r1rho, 12 sites x 12 points with test": (group, MODEL),
        "cpmg, the same": (exchanging(exact_cpmg, TRAIN), cpmg_model()),
        "exchange-r1rho, the same": (
            exchanging(exact_r1rho, LOCK),
            exchange_r1rho_model(),
        ),
    }
    for name, (profiles, model) in jobs.items():
        with timed(name, bare):
            judge_group(profiles, model, rng=rng, options=options)
    with timed("mas-r1rho, 250 sites one by one with intervals", bare):
        fit_each(many, MODEL)


@contextmanager
def timed(name: str, bare: float) -> Iterator[None]:
    """Print wall and processor time of a job, and the ratio to bare imports."""
    wall, processor = time.perf_counter(), time.process_time()
    yield
    wall, processor = time.perf_counter() - wall, time.process_time() - processor
    print(
        f"{name}: {wall:.2f} s, {processor:.2f} s of the processor, "
        f"{wall / bare:.1f} x bare imports",
        flush=True,
    )


def exchanging(exact: Callable[..., np.ndarray], x: np.ndarray) -> Profiles:
    """Return twelve sites of one exchange process with 3 % errors."""
    rng = np.random.default_rng(0)
    true = np.array(
        [
            exact(
                x,
                TwoSites(
                    exchange_rate_per_second=1500,
                    major_population=0.93,
                    shift_difference=shift,
                    r1=1.5,
                    r2=10,
                ),
            )
            for shift in 2 * np.pi * rng.uniform(60, 250, 12)
        ]
    )
    error = 0.03 * true
    return make_profiles(x, true + error * rng.standard_normal(true.shape), error)


if __name__ == "__main__":
    clock()
    groups = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    if groups > 0:
        calibrate(groups, int(sys.argv[2]) if len(sys.argv) > 2 else 199)
