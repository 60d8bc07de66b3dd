"""Time the whole job on the built-in example against the bare imports it rests on.

Run as ``python -m tests.benchmarks.run``. Each round starts new processes in turn, so
that whatever else the machine does hits all of them alike; the medians are compared.
Nothing here fails: the figures are for people to read.
"""

import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROUNDS = 7
BARE = "import gemmi, numpy, scipy, pandas"
JOBS = {
    "bare imports": ["-c", BARE],
    "structmap --help": ["-m", "structmap.cli", "--help"],
    "structmap example": [
        "-m",
        "structmap.cli",
        "example",
        "-o",
        "{folder}",
        "--quiet",
    ],
}


def seconds_of(arguments: list[str], folder: Path) -> float:
    """Return how long a new Python process takes for one job."""
    words = [word.format(folder=folder) for word in arguments]
    start = time.perf_counter()
    subprocess.run([sys.executable, *words], check=True, capture_output=True)
    return time.perf_counter() - start


def main() -> None:
    """Print the median of each job and its ratio to the bare imports."""
    seconds: dict[str, list[float]] = {job: [] for job in JOBS}
    with tempfile.TemporaryDirectory() as parent:
        for round_number in range(ROUNDS + 1):
            for job, arguments in JOBS.items():
                taken = seconds_of(arguments, Path(parent) / str(round_number))
                if round_number > 0:  # the first round fills the disk's cache
                    seconds[job].append(taken)
    medians = {job: statistics.median(taken) for job, taken in seconds.items()}
    bare = medians["bare imports"]
    print(f"{'job':20} {'median s':>9} {'ratio':>6}   ({ROUNDS} rounds)")
    for job, median in medians.items():
        print(f"{job:20} {median:9.2f} {median / bare:6.2f}")


if __name__ == "__main__":
    main()
