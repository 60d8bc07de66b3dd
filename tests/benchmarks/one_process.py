"""Calibration and speed of the test of one process; run by hand.

Usage: python -m tests.benchmarks.one_process [groups] [replicates]
"""

import sys
import time

import numpy as np

from structmap.one_process import TestOptions, fit_each, judge_group, make_profiles
from tests.one_process.demo import FIELDS, MODEL
from tests.one_process.simulated import CASES, Case, run_case


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
    """Print the times of the two jobs that users wait for."""
    rng = np.random.default_rng(1)
    group = Case("twelve", kinetics=False, values=(1e-5,) * 12).draw(rng)
    start = time.perf_counter()
    judge_group(group, MODEL, rng=rng, options=TestOptions(n_border=999))
    print(f"12 sites x 12 points with test: {time.perf_counter() - start:.2f} s")
    many = [Case("many", kinetics=False, values=(1e-5,) * 250).draw(rng)]
    profiles = make_profiles(FIELDS, many[0].value, many[0].error)
    start = time.perf_counter()
    fit_each(profiles, MODEL)
    print(f"250 sites one by one: {time.perf_counter() - start:.2f} s")


if __name__ == "__main__":
    clock()
    calibrate(
        int(sys.argv[1]) if len(sys.argv) > 1 else 1000,
        int(sys.argv[2]) if len(sys.argv) > 2 else 199,
    )
