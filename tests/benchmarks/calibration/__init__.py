"""How often units and verdicts are right on problems with a known answer."""

from tests.benchmarks.calibration.figures import calibration_error, summarise
from tests.benchmarks.calibration.outcome import Outcome
from tests.benchmarks.calibration.own import run_file, to_measurements
from tests.benchmarks.calibration.rows import DATA, ROWS

__all__ = [
    "DATA",
    "ROWS",
    "Outcome",
    "calibration_error",
    "run_file",
    "summarise",
    "to_measurements",
]
