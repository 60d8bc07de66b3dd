"""Problems with a known answer on real coordinate files, and how answers are scored.

Patches of residues are given a common motion; everybody else is at rest, or on a
smooth field with single movers strewn in. Everything follows from file, settings and
seed.
"""

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    SiteGraph,
    choose_assemblies,
    contact_cutoff,
    find_contacts,
    make_site_graph,
)
from structmap.lattice import connected_pieces
from structmap.settings import Settings
from structmap.significance import cutoffs_to_vary
from structmap.sites import Sites, match_sites, site_centres
from structmap.structure import POLYMER, Structure, read_structure
from structmap.values import ValueTable, read_values

BASELINE = 20.0
MEMBER_SCATTER, ERROR_SCATTER = 0.15, 0.2
SINGLES_SHARE, MISSING_SHARE = 0.04, 0.1
FIELD_BUMPS, FIELD_WIDTH = 8, 0.7
SMALLEST_PATCH, LARGEST_PATCH = 3, 6
TRIES = 300
Kind = Literal["units", "null", "scatter", "lattice"]


class NoRoomError(Exception):
    """A structure has no place for units of a plan."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """What to plant: points a site, effect in errors, a field or none, what kind.

    Errors are stated `misreport` times as large as they are.
    """

    n_points: int
    effect: float
    field: bool
    kind: Kind = "units"
    n_units: int = 3
    misreport: float = 1.0


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Ground:
    """A structure whose residues are all sites, and its contacts at some cutoffs."""

    path: Path
    structure: Structure
    sites: Sites
    graphs: tuple[SiteGraph, ...]
    cutoffs: tuple[float, ...]
    centres: NDArray[np.float64]

    @property
    def graph(self) -> SiteGraph:
        """Contacts at the usual cutoff."""
        return self.graph_at(self.cutoff_angstrom)

    @property
    def cutoff_angstrom(self) -> float:
        """The usual cutoff: between heavy atoms, or between CA atoms."""
        return usual_cutoff(self.structure)

    def graph_at(self, cutoff_angstrom: float) -> SiteGraph:
        """Contacts at one of the cutoffs."""
        return self.graphs[self.cutoffs.index(cutoff_angstrom)]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Problem:
    """Values of the measured sites, and the truth: 0 is no unit."""

    site: NDArray[np.int64]
    x: NDArray[np.float64]
    value: NDArray[np.float64]
    error: NDArray[np.float64]
    unit: NDArray[np.int64]


def usual_cutoff(structure: Structure) -> float:
    """Return the cutoff that an analysis takes by itself."""
    usual = Settings()
    return contact_cutoff(
        structure,
        cutoff_angstrom=usual.cutoff_angstrom,
        ca_cutoff_angstrom=usual.ca_cutoff_angstrom,
    )


def read_ground(path: Path, folder: Path) -> Ground:
    """Read a structure and make every polymer residue a site."""
    structure = read_structure(path)
    values = folder / f"{path.name}.csv"
    polymer = np.flatnonzero(
        (structure.kind_of_residue == POLYMER)
        & (structure.original_residue == np.arange(len(structure.kind_of_residue)))
    )
    rows = [
        f"{structure.auth_asym_id[i]},{structure.auth_seq_id[i]}{structure.ins_code[i]},1"
        for i in polymer
    ]
    values.write_text("\n".join(["auth_asym_id,auth_seq_id,value", *rows]) + "\n")
    table: ValueTable = read_values(values)
    sites = match_sites(structure, table)
    cutoffs = cutoffs_to_vary(usual_cutoff(structure), ca_only=structure.ca_only)
    contacts = find_contacts(
        structure,
        reach_angstrom=max(cutoffs),
        assemblies=choose_assemblies(structure, "auto"),
    )
    return Ground(
        path=path,
        structure=structure,
        sites=sites,
        graphs=tuple(
            make_site_graph(contacts, sites, cutoff_angstrom=cutoff)
            for cutoff in cutoffs
        ),
        cutoffs=cutoffs,
        centres=site_centres(structure, sites),
    )


def neighbours(graph: SiteGraph, highest_kind: int) -> list[list[int]]:
    """Return the sites that each site touches by such kinds, sorted."""
    out: list[list[int]] = [[] for _ in range(graph.n_sites)]
    for one, two, kind in zip(graph.site_1, graph.site_2, graph.kind, strict=True):
        if kind <= highest_kind:
            out[one].append(int(two))
            out[two].append(int(one))
    return [sorted(each) for each in out]


def decay(x: NDArray[np.float64], rng: np.random.Generator) -> NDArray[np.float64]:
    """Return a profile that falls from 1 to a plateau: a Lorentzian over x."""
    if len(x) == 1:
        return np.array([rng.choice([-1.0, 1.0])])
    width = 3.0 * 15 ** rng.random()
    curve = 1 / (1 + (x / width) ** 2)
    return curve / curve[0]


def grow_patch(
    near: list[list[int]], taken: set[int], rng: np.random.Generator
) -> list[int]:
    """Grow a patch of 4 to 12 sites from anywhere."""
    size = int(rng.integers(4, 13))
    return grow_from(int(rng.integers(len(near))), size, near, taken, rng)


def grow_from(
    start: int,
    size: int,
    near: list[list[int]],
    taken: set[int],
    rng: np.random.Generator,
) -> list[int]:
    """Grow a patch, preferring sites that touch it more than once; empty if stuck."""
    patch = [] if start in taken else [start]
    while patch and len(patch) < size:
        edge = [j for i in patch for j in near[i] if j not in taken and j not in patch]
        if not edge:
            return []
        patch.append(edge[int(rng.integers(len(edge)))])
    return patch


def plant(ground: Ground, plan: Plan, seed: int) -> Problem:
    """Make one problem.

    Raises `NoRoomError` where no unit finds a place.
    """
    rng = np.random.default_rng([seed, plan.n_points, int(10 * plan.effect)])
    n_sites = ground.graph.n_sites
    x = np.geomspace(1.0, 40.0, plan.n_points) if plan.n_points > 1 else np.zeros(1)
    unit, shift = plant_units(ground.graph, x, plan, rng)
    if plan.field:
        shift += smooth_field(ground.centres, x, rng)
        add_singles(ground.graph, shift, unit, (x, plan.effect), rng)
    error = np.exp(ERROR_SCATTER * rng.standard_normal(n_sites))
    noise = error[:, None] * rng.standard_normal((n_sites, len(x)))
    value = BASELINE + shift + noise
    if plan.kind == "scatter":
        order = rng.permutation(n_sites)
        value, error, unit = value[order], error[order], 0 * unit
    measured = draw_measured(ground.graph, unit, plan, rng)
    return Problem(
        site=measured,
        x=x,
        value=value[measured],
        error=plan.misreport * error[measured],
        unit=unit[measured],
    )


def draw_measured(
    graph: SiteGraph, unit: NDArray[np.int64], plan: Plan, rng: np.random.Generator
) -> NDArray[np.int64]:
    """Leave sites out at random; what joins a unit over the lattice stays measured."""
    n_kept = graph.n_sites - round(MISSING_SHARE * graph.n_sites)
    for _ in range(TRIES):
        measured = np.sort(rng.choice(graph.n_sites, n_kept, replace=False))
        if plan.kind != "lattice" or all(
            needs_lattice(graph, measured[unit[measured] == u])
            for u in range(1, unit.max() + 1)
        ):
            return measured
    raise NoRoomError("units fall apart when sites are left out")


def needs_lattice(graph: SiteGraph, members: NDArray[np.int64]) -> bool:
    """Tell whether members are two patches that only lattice contacts join."""
    if len(members) < 2 * SMALLEST_PATCH:
        return False
    patches = connected_pieces(members, graph, highest_kind=COMPLEX)
    whole = connected_pieces(members, graph, highest_kind=LATTICE)
    sizes = [len(patch) for patch in patches]
    return len(whole) == 1 and len(sizes) == 2 and min(sizes) >= SMALLEST_PATCH


def plant_units(
    graph: SiteGraph, x: NDArray[np.float64], plan: Plan, rng: np.random.Generator
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Place the units, apart from each other, and shift their members."""
    unit = np.zeros(graph.n_sites, np.int64)
    shift = np.zeros((graph.n_sites, len(x)))
    wanted = 0 if plan.kind == "null" else plan.n_units
    chain = neighbours(graph, CHAIN)
    rest, every = neighbours(graph, COMPLEX), neighbours(graph, LATTICE)
    bridges = lattice_bridges(graph) if plan.kind == "lattice" and wanted else None
    planted = 0
    for _ in range(TRIES):
        if planted == wanted:
            break
        inside = set(np.flatnonzero(unit).tolist())
        taken = inside | {j for i in inside for j in every[i]}
        if bridges is None:
            patch = grow_patch(chain, taken, rng)
        else:
            patch = grow_pair(rest, bridges, taken, rng)
        if patch and len(inside) + len(patch) <= 0.35 * graph.n_sites:
            planted += 1
            profile = plan.effect * rng.uniform(1, 1.5) * decay(x, rng)
            scatter = np.exp(MEMBER_SCATTER * rng.standard_normal((len(patch), 1)))
            unit[patch], shift[patch] = planted, profile * scatter
    if wanted and not planted:
        raise NoRoomError("no unit of this kind has a place")
    return unit, shift


def lattice_bridges(graph: SiteGraph) -> list[tuple[int, int]]:
    """Return the pairs of sites that touch through the lattice alone."""
    between = graph.kind == LATTICE
    pairs = zip(graph.site_1[between], graph.site_2[between], strict=True)
    found = [(int(one), int(two)) for one, two in pairs]
    if not found:
        raise NoRoomError("no two sites touch through the lattice alone")
    return found


def grow_pair(
    near: list[list[int]],
    bridges: list[tuple[int, int]],
    taken: set[int],
    rng: np.random.Generator,
) -> list[int]:
    """Grow two patches of 3 to 6 sites, apart but for one bridge at least."""
    one, two = bridges[int(rng.integers(len(bridges)))]
    sizes = rng.integers(SMALLEST_PATCH, LARGEST_PATCH + 1, 2).tolist()
    first = grow_from(one, sizes[0], near, taken | {two}, rng)
    beside = {j for i in first for j in near[i]}
    if not first or two in beside:
        return []
    second = grow_from(two, sizes[1], near, taken | beside | set(first), rng)
    return first + second if second else []


def smooth_field(
    centres: NDArray[np.float64], x: NDArray[np.float64], rng: np.random.Generator
) -> NDArray[np.float64]:
    """Return a field of wide bumps over the fold, of one error at the first point."""
    span = float(np.ptp(centres, axis=0).max())
    places = rng.uniform(centres.min(0), centres.max(0), (FIELD_BUMPS, 3))
    distance = np.linalg.norm(centres[:, None] - places, axis=2)
    bumps = np.exp(-((distance / (FIELD_WIDTH * span)) ** 2))
    field = bumps @ rng.standard_normal(FIELD_BUMPS)
    field = (field - field.mean()) / field.std()
    form = 0.5 + 0.5 * np.abs(decay(x, rng)) if len(x) > 1 else np.ones(1)
    return field[:, None] * form


def add_singles(
    graph: SiteGraph,
    shift: NDArray[np.float64],
    unit: NDArray[np.int64],
    curve: tuple[NDArray[np.float64], float],
    rng: np.random.Generator,
) -> None:
    """Let some sites move alone, away from units and from each other."""
    x, effect = curve
    near = neighbours(graph, LATTICE)
    blocked = set(np.flatnonzero(unit).tolist())
    wanted = max(1, round(SINGLES_SHARE * graph.n_sites))
    for site in rng.permutation(graph.n_sites).tolist():
        if wanted and not ({site, *near[site]} & blocked):
            shift[site] += effect * rng.uniform(1, 1.5) * decay(x, rng)
            blocked.add(site)
            wanted -= 1


# --- scoring --------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Score:
    """How an answer compares with the truth; shares are of true units.

    `matched` gives the found unit of each true one (overlap of at least half of their
    union); `false` the found units of which less than half lies in any true one.
    """

    rand_index: float
    n_true: int
    n_found: int
    matched: dict[int, int]
    false: tuple[int, ...]


def adjusted_rand_index(one: NDArray[np.int64], two: NDArray[np.int64]) -> float:
    """Return the adjusted Rand index (Hubert and Arabie, J. Classif. 2, 193, 1985)."""
    first = np.unique(one, return_inverse=True)[1]
    second = np.unique(two, return_inverse=True)[1]
    table = np.zeros((first.max() + 1, second.max() + 1))
    np.add.at(table, (first, second), 1)
    pairs = [
        float((t * (t - 1) / 2).sum()) for t in (table, table.sum(1), table.sum(0))
    ]
    n = len(one)
    expected = pairs[1] * pairs[2] / (n * (n - 1) / 2)
    largest = (pairs[1] + pairs[2]) / 2
    if largest == expected:
        return 1.0
    return (pairs[0] - expected) / (largest - expected)


def score(truth: NDArray[np.int64], found: NDArray[np.int64]) -> Score:
    """Hold found units (0 for none) against the truth, over measured sites."""
    true = {
        u: set(np.flatnonzero(truth == u).tolist())
        for u in sorted(set(truth.tolist()) - {0})
    }
    seen = {
        u: set(np.flatnonzero(found == u).tolist())
        for u in sorted(set(found.tolist()) - {0})
    }
    large = {u: members for u, members in true.items() if len(members) >= 3}
    matched = {}
    for u, members in large.items():
        overlap = {f: len(members & s) / len(members | s) for f, s in seen.items()}
        best = max(overlap, key=overlap.__getitem__, default=None)
        if best is not None and overlap[best] >= 0.5:
            matched[u] = best
    false = tuple(
        f
        for f, s in seen.items()
        if all(2 * len(s & members) < len(s) for members in true.values())
    )
    return Score(
        rand_index=adjusted_rand_index(truth, found),
        n_true=len(large),
        n_found=len(seen),
        matched=matched,
        false=false,
    )
