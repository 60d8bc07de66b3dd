"""Time the tests of chance against permutation runs of esda, in one process.

Run as ``python -m tests.benchmarks.significance``. The problem is planted on 4ZHL:
about 230 measured sites, profiles of ten points, three units. Each test draws 999
placements and searches every one of them for units; esda permutes one number a site
999 times for one statistic (Moran's I of the map, and local G* of every site), and
``anew`` makes Moran's I from each of 999 permuted maps, as the search is made anew. The
sides run in turn; the best of each is compared. A large molecule is timed once: a
lattice of 20,000 sites in a box. Nothing here fails: the figures are for people to
read. ``--large`` adds the box, which takes minutes.
"""

import argparse
import resource
import tempfile
import time
import warnings
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np

from structmap.behaviour import Measurements
from structmap.contacts import SiteGraph
from structmap.motional_units import UnitSearch, find_motional_units
from structmap.motional_units.choices import vary_contacts, vary_thresholds
from structmap.motional_units.field import Field, Integers, Links
from structmap.significance import Effort, judge_units
from structmap.significance.judging import (
    PERMUTATIONS,
    _profile,
    _without_others,
)
from structmap.significance.placement import order_scorer, random_orders
from structmap.significance.stability import batch_size
from structmap.significance.surrogates import smooth_orders
from tests.benchmarks.calibration import DATA, to_measurements
from tests.planted_problems import Plan, plant, read_ground

ROUNDS = 3
LARGE_SIDE, LARGE_SITES, LARGE_POINTS = 28, 20_000, 10


def best_seconds(jobs: dict[str, Callable[[], object]]) -> dict[str, float]:
    """Return the least processor time of each job, run in turn on one thread."""
    seconds: dict[str, list[float]] = {name: [] for name in jobs}
    for _ in range(ROUNDS):
        for name, job in jobs.items():
            start = time.process_time()
            job()
            seconds[name].append(time.process_time() - start)
    return {name: min(taken) for name, taken in seconds.items()}


def place_once(search: UnitSearch) -> None:
    """Hold the first unit against all permutations, without stopping early."""
    field, links = _without_others(search, 0)
    draw_all(field, links, random_orders(links.n_rows, np.random.default_rng(1)))


def smooth_once(search: UnitSearch) -> None:
    """Hold the first unit against all smooth placements, without stopping early."""
    field, links = _without_others(search, 0)
    rng = np.random.default_rng(2)
    draw_all(field, links, smooth_orders(field, links, _profile(search, 0), rng))


def draw_all(field: Field, links: Links, source: Callable[[int], Integers]) -> None:
    """Score 999 placements."""
    score = order_scorer(field, links)
    left = PERMUTATIONS
    while left:
        count = min(left, batch_size(links.n_rows))
        score(source(count))
        left -= count


def our_jobs(search: UnitSearch) -> dict[str, Callable[[], object]]:
    """Return the three tests, each with the full number of permutations."""
    everything = search.field, search.links
    random = partial(random_orders, search.links.n_rows)
    return {
        "p_any": lambda: draw_all(*everything, random(np.random.default_rng(0))),
        "p_place": lambda: place_once(search),
        "p_smooth": lambda: smooth_once(search),
    }


def esda_jobs(search: UnitSearch) -> dict[str, Callable[[], object]]:
    """Return permutation runs of two statistics by esda on the same contacts."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import esda  # noqa: PLC0415  # slow to import and warns of what it lacks
        from libpysal.weights import W  # noqa: PLC0415

    links = search.links
    near = {
        row: links.neighbour[links.start[row] : links.start[row + 1]].tolist()
        for row in range(links.n_rows)
    }
    values = search.behaviour.summary

    def quietly(job: Callable[[], object]) -> Callable[[], object]:
        def run() -> object:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                return job()

        return run

    def anew() -> None:
        rng = np.random.default_rng(3)
        for _ in range(PERMUTATIONS):
            esda.Moran(rng.permutation(values), weights, permutations=0)

    weights = quietly(lambda: W(near, silence_warnings=True))()
    return {
        "esda Moran": quietly(
            lambda: esda.Moran(values, weights, permutations=PERMUTATIONS)
        ),
        "esda anew": quietly(anew),
        "esda G_Local": quietly(
            lambda: esda.G_Local(
                values, weights, permutations=PERMUTATIONS, star=True, n_jobs=1
            )
        ),
    }


def large_problem() -> tuple[Measurements, SiteGraph, np.ndarray]:
    """Return 20,000 sites in a box with 40 units, each a site and what touches it."""
    rng = np.random.default_rng(4)
    grid = np.indices((LARGE_SIDE,) * 3).reshape(3, -1).T[:LARGE_SITES]
    centres = 5.0 * grid + rng.normal(0, 0.5, grid.shape)
    number = {tuple(cell): k for k, cell in enumerate(grid.tolist())}
    steps = [(1, 0, 0), (0, 1, 0), (0, 0, 1), (1, 1, 0), (0, 1, 1)]
    pairs = sorted(
        (k, number[other])
        for cell, k in number.items()
        for step in steps
        if (other := tuple(np.add(cell, step).tolist())) in number
    )
    first, second = np.array(pairs).T
    value = rng.normal(10, 1, (LARGE_SITES, LARGE_POINTS))
    shape = np.linspace(6, 0, LARGE_POINTS)
    for seed in rng.choice(LARGE_SITES, 40, replace=False).tolist():
        members = [seed, *second[first == seed].tolist(), *first[second == seed]]
        value[members] += shape
    graph = SiteGraph(
        n_sites=LARGE_SITES,
        site_1=first,
        site_2=second,
        kind=np.zeros(len(first), np.int64),
        distance_angstrom=np.full(len(first), 4.0),
    )
    data = Measurements(
        site=np.arange(LARGE_SITES),
        value=value,
        error=np.ones_like(value),
        column=tuple(f"point {k}" for k in range(LARGE_POINTS)),
        is_profile=True,
        part="whole",
        errors_given=True,
        point_kept=np.ones(LARGE_POINTS, bool),
        point_reason=("",) * LARGE_POINTS,
        notes=(),
    )
    return data, graph, centres


def time_large() -> None:
    """Print how long the whole of a large problem takes, and how much memory."""
    data, graph, centres = large_problem()
    start = time.perf_counter()
    search = find_motional_units(data, graph, centres)
    found = time.perf_counter() - start
    judged = judge_units(
        search, (graph,) * 4, rng=np.random.default_rng(0), effort=Effort(workers=1)
    )
    tested = time.perf_counter() - start
    vary_contacts(search, {str(k): graph for k in range(4)})
    vary_thresholds(search)
    whole = time.perf_counter() - start
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    shown = sum(unit.verdict != "tentative" for unit in judged.units)
    print(
        f"{LARGE_SITES} sites x {LARGE_POINTS} points: search {found:.1f} s, with all "
        f"tests {tested:.1f} s, with other choices {whole:.1f} s; "
        f"{len(search.members)} units, {shown} of them shown; "
        f"at most {peak:.1f} GB"
    )


def main(arguments: list[str] | None = None) -> None:
    """Print the seconds of each job and the ratios to esda."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--large", action="store_true", help="add 20,000 sites")
    call = parser.parse_args(arguments)
    with tempfile.TemporaryDirectory() as folder:
        ground = read_ground(DATA / "4zhl.cif.gz", Path(folder))
    plan = Plan(n_points=10, effect=5.0, field=False)
    problem = plant(ground, plan, 7)
    search = find_motional_units(to_measurements(problem), ground.graph, ground.centres)
    ours, theirs = our_jobs(search), esda_jobs(search)
    best = best_seconds({**ours, **theirs})
    print(f"{search.links.n_rows} sites, {PERMUTATIONS} permutations")
    columns = "".join(f"{'/ ' + name:>16}" for name in theirs)
    print(f"{'job':14}{'s':>8}{columns}")
    for name, seconds in best.items():
        ratios = "".join(f"{seconds / best[other]:16.2f}" for other in theirs)
        print(f"{name:14}{seconds:8.3f}{ratios}")
    if call.large:
        time_large()


if __name__ == "__main__":
    main()
