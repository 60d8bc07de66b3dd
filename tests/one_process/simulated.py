"""Simulated groups with one value, or several, of a process parameter."""

from dataclasses import dataclass

import numpy as np

from structmap.one_process import TestOptions, judge_group, make_profiles
from structmap.one_process.kinetics import exponential_model
from tests.one_process.demo import FIELDS, MODEL

TIMES = np.linspace(0.1, 6.0, 12)
KINETICS = exponential_model()


@dataclass(frozen=True)
class Case:
    """A kind of group: model, true value of each site, what is said about errors."""

    name: str
    kinetics: bool
    values: tuple[float, ...]
    stated: float = 1.0
    noise: float = 0.05

    @property
    def truth(self):
        """The shared value, NaN for groups that share none."""
        return self.values[0] if len(set(self.values)) == 1 else float("nan")

    def draw(self, rng):
        """Return profiles of one group."""
        value = np.array(self.values)[:, None]
        n_sites = len(self.values)
        if self.kinetics:
            size = rng.uniform(0.7, 1.3, n_sites)[:, None]
            true = 0.2 + size * np.exp(-value * TIMES)
            error = self.noise * np.ones_like(true)
            x = TIMES
        else:
            size = rng.uniform(0.01, 0.04, n_sites)[:, None]
            base = rng.uniform(1.5, 3.5, n_sites)[:, None]
            true = base + size * MODEL.function(FIELDS, value)
            error = self.noise * true
            x = FIELDS
        measured = true + error * rng.standard_normal(true.shape)
        return make_profiles(x, measured, self.stated * error)

    @property
    def model(self):
        """The model that is fitted."""
        return KINETICS if self.kinetics else MODEL


def split(value, ratio, *, odd=4, size=8):
    """Return values of a group of which `odd` sites have another one."""
    low, high = value / np.sqrt(ratio), value * np.sqrt(ratio)
    return (low,) * (size - odd) + (high,) * odd


ONE_RATE = Case("kinetics, one rate", kinetics=True, values=(0.7,) * 8)
ONE_TIME = Case("R1rho, one tau 1e-5", kinetics=False, values=(1e-5,) * 8)
CASES = (
    ONE_RATE,
    Case("kinetics, errors x 0.5", kinetics=True, values=(0.7,) * 8, stated=0.5),
    Case("kinetics, errors x 2", kinetics=True, values=(0.7,) * 8, stated=2.0),
    *(
        Case(f"kinetics, 4 + 4, ratio {r}", kinetics=True, values=split(0.7, r))
        for r in (1.5, 2.0, 3.0)
    ),
    Case("kinetics, 7 + 1, ratio 3", kinetics=True, values=split(0.7, 3.0, odd=1)),
    ONE_TIME,
    Case("R1rho, one tau 3e-6", kinetics=False, values=(3e-6,) * 8),
    Case("R1rho, one tau 3e-5", kinetics=False, values=(3e-5,) * 8),
    *(
        Case(f"R1rho, 4 + 4, ratio {r}", kinetics=False, values=split(1e-5, r))
        for r in (1.5, 2.0)
    ),
    Case("R1rho, 4 + 4 outside", kinetics=False, values=split(1e-6, 3.0)),
)


@dataclass(frozen=True)
class Outcome:
    """Shares of groups: interval holds the truth, p below 0.05, verdicts."""

    covered: float
    parametric: float
    both: float
    verdicts: dict[str, float]


def run_case(case, *, n_groups, n_replicates, seed):
    """Judge many groups of a kind."""
    rng = np.random.default_rng(seed)
    options = TestOptions(n_replicates=n_replicates, n_border=n_replicates)
    covered, parametric, both, verdicts = 0, 0, 0, {}
    for _ in range(n_groups):
        found = judge_group(case.draw(rng), case.model, rng=rng, options=options)
        above = not found.low > case.truth  # open ends are NaN and hold everything
        below = not found.high < case.truth
        covered += above and below
        parametric += found.p_parametric < 0.05
        both += max(found.p_parametric, found.p_wild) < 0.05
        verdicts[found.verdict] = verdicts.get(found.verdict, 0) + 1
    return Outcome(
        covered=covered / n_groups,
        parametric=parametric / n_groups,
        both=both / n_groups,
        verdicts={name: count / n_groups for name, count in sorted(verdicts.items())},
    )
