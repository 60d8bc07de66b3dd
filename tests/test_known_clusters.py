"""General data with clusters that were published, from a package of open examples.

Homicides in 78 counties around St. Louis (package libpysal, folder stl). Messner,
Anselin, Baller, Hawkins, Deane and Tolnay, J. Quant. Criminol. 15, 423 (1999), from
memory: in all periods one cluster of high rates, St. Louis City and St. Clair across
the river, and no other that lasts.
"""

import importlib.util
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from structmap.behaviour import Measurements
from structmap.contacts import SiteGraph
from structmap.motional_units import find_motional_units

CORE = {"St. Louis City", "St. Clair"}


@pytest.fixture(scope="module")
def counties():
    package = importlib.util.find_spec("libpysal")
    if package is None or package.origin is None:
        pytest.skip("libpysal is in the test extra")
    folder = Path(package.origin).parent / "examples" / "stl"
    table = pd.read_csv(folder / "stl_hom.csv")
    lines = (folder / "stl.gal").read_text().split("\n")[1:]
    number = {int(line.split()[0]): k for k, line in enumerate(lines[: 2 * 78 : 2])}
    ends = [
        (k, number[int(other)])
        for k, line in enumerate(lines[1 : 2 * 78 : 2])
        for other in line.split()
    ]
    pairs = np.unique(np.sort(np.array(ends), axis=1), axis=0)
    graph = SiteGraph(
        n_sites=78,
        site_1=pairs[:, 0],
        site_2=pairs[:, 1],
        kind=np.zeros(len(pairs), np.int64),
        distance_angstrom=np.full(len(pairs), 4.0),
    )
    return table, graph


def test_the_counties_of_the_core_touch(counties):
    table, graph = counties
    city, across = (int(np.flatnonzero(table["NAME"] == name)[0]) for name in CORE)
    pairs = set(zip(graph.site_1.tolist(), graph.site_2.tolist(), strict=True))
    assert (min(city, across), max(city, across)) in pairs


def middle(outline: str) -> tuple[float, float, float]:
    """Return the middle of an outline in units in which neighbours are some 5 apart."""
    numbers = np.array(re.findall(r"-?\d+\.\d+", outline), float).reshape(-1, 2)
    east, north = 12 * numbers.mean(axis=0)
    return float(east), float(north), 0.0


@pytest.mark.parametrize("period", ["7984", "8488", "8893"])
def test_the_cluster_of_high_rates_moves_and_little_else_does(counties, period):
    table, graph = counties
    count, people = (table[f"{kind}{period}"].to_numpy(float) for kind in ("HC", "PO"))
    # Freeman and Tukey, Ann. Math. Stat. 21, 607 (1950): variance 1/n.
    rate = np.sqrt(1e5) * (np.sqrt(count / people) + np.sqrt((count + 1) / people))
    measured = Measurements(
        site=np.arange(78),
        value=rate[:, None],
        error=np.sqrt(1e5 / people)[:, None],
        column=("rate",),
        is_profile=False,
        part="whole",
        errors_given=True,
        point_kept=np.ones(0, bool),
        point_reason=(),
        notes=(),
    )
    centres = np.array([middle(outline) for outline in table["WKT"]])
    found = find_motional_units(measured, graph, centres).behaviour
    high = found.moves & (rate > np.median(rate))
    assert set(table["NAME"][high]) >= CORE
    assert found.moves.sum() <= 5
