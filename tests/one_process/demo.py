"""Invented spin-lock profiles with known correlation times."""

import numpy as np

from structmap.experiment import Experiment
from structmap.one_process import make_profiles
from structmap.one_process.dispersion import motion_kernel, spinning_model

CONDITIONS = Experiment(
    mas_rate_hertz=60e3, proton_frequency_megahertz=600.0, sample="deuterated"
)
MODEL = spinning_model(CONDITIONS)
FIELDS = 1e3 * np.array([5, 8, 11, 14, 17, 20, 23, 26, 36, 41, 46, 50])
BLOCKS = {
    "P": (10, 7e-6, (0.004, 0.012)),
    "Q": (8, 1.8e-5, (0.002, 0.006)),
    "R": (6, 8e-7, (0.004, 0.010)),
    "X": (7, np.geomspace(4e-6, 3e-5, 7), (0.003, 0.008)),
    "B": (45, 1e-8, (0.05, 0.15)),
}


def make_blocks(seed=20260101):
    """Return profiles by block; the blocks are drawn in one order."""
    rng = np.random.default_rng(seed)
    blocks = {}
    for name, (size, tau, (low, high)) in BLOCKS.items():
        amplitude = rng.uniform(low, high, size)
        baseline = rng.uniform(1.5, 3.5, size)
        times = np.broadcast_to(tau, (size,))[:, None]
        kernel = motion_kernel(FIELDS, times, experiment=CONDITIONS)
        true = baseline[:, None] + amplitude[:, None] * kernel
        error = 0.03 * true + 0.15
        value = true + error * rng.standard_normal(true.shape)
        names = tuple(f"{name}{number}" for number in range(1, size + 1))
        blocks[name] = make_profiles(FIELDS, value, error, name=names)
    return blocks


def join(*parts):
    """Return the profiles of several blocks as one."""
    return make_profiles(
        FIELDS,
        np.concatenate([part.value for part in parts]),
        np.concatenate([part.error for part in parts]),
        name=tuple(name for part in parts for name in part.name),
    )
