"""Slow modes of a network, and whether a group of residues moves together in them."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import eigsh

from structmap.records import store_read_only

SLOW_MODES = 20
RANDOM_GROUPS = 199
FEWEST_GROUPS = 19
DENSE_UP_TO = 500
ATTEMPTS_PER_GROUP = 30
CLINGING = (-0.5, 0.0, 0.5, 1.0, 2.0, 4.0)
SAME_COMPACTNESS = 0.1


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class SlowModes:
    """The softest modes of a network.

    Attributes
    ----------
    eigenvalue : ndarray of float, shape (n_modes,)
        Rising, above 0, in spring constants.
    vector : ndarray of float, shape (n_nodes, n_modes)
        Orthonormal columns.
    """

    eigenvalue: NDArray[np.float64]
    vector: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "eigenvalue", np.float64, (None,))
        store_read_only(self, "vector", np.float64, (None, len(self.eigenvalue)))


def find_slow_modes(laplacian: csr_array, *, n_modes: int = SLOW_MODES) -> SlowModes:
    """Return the softest modes of a network that are no motion as a whole.

    Parameters
    ----------
    laplacian : sparse array, shape (n_nodes, n_nodes)
        Connectivity matrix.
    n_modes : int, default 20
        How many, fewer when the network has fewer.

    Returns
    -------
    SlowModes
        Without the modes of eigenvalue 0, one for each part that is not tied to the
        others.
    """
    n_nodes = laplacian.shape[0]
    n_parts = connected_components(laplacian, directed=False)[0]
    wanted = min(n_modes + n_parts, n_nodes)
    if n_nodes <= DENSE_UP_TO or wanted > n_nodes // 2:
        value, vector = np.linalg.eigh(laplacian.toarray())
    else:
        shift = -1e-4 * float(laplacian.diagonal().mean())  # keeps the matrix regular
        start = np.cos(np.arange(n_nodes))  # fixed, so that results repeat
        value, vector = eigsh(laplacian.tocsc(), k=wanted, sigma=shift, v0=start)
    order = np.argsort(value)[n_parts:wanted]
    return SlowModes(eigenvalue=value[order], vector=vector[:, order])


@dataclass(frozen=True, slots=True, kw_only=True)
class MovesTogether:
    """Whether a group moves together more than chance groups of its compactness.

    Attributes
    ----------
    correlation : float
        Mean correlation of the fluctuations of two members in the slow modes, -1 to 1.
    random_mean, random_high : float
        Mean and 95th percentile of random groups.
    p_value : float
        Share of random groups that correlate at least as much; NaN when too few of the
        same compactness were found.
    n_groups : int
        Random groups found.
    """

    correlation: float
    random_mean: float
    random_high: float
    p_value: float
    n_groups: int


def judge_moving_together(
    nodes: NDArray[np.int64],
    laplacian: csr_array,
    *,
    modes: SlowModes,
    rng: np.random.Generator,
    n_groups: int = RANDOM_GROUPS,
) -> MovesTogether:
    """Tell whether nodes move together in the slow modes, against random groups.

    Parameters
    ----------
    nodes : ndarray of int, shape (n_members,)
        Nodes of the network, two at least.
    laplacian : sparse array, shape (n_nodes, n_nodes)
        Connectivity matrix that the modes belong to.
    modes : SlowModes
        Its softest modes.
    rng : Generator
        Source of chance.
    n_groups : int, default 199
        Random groups to compare with.

    Returns
    -------
    MovesTogether
        Model evidence.

    Raises
    ------
    ValueError
        If there are fewer than two nodes.

    Notes
    -----
    Random groups are connected, of the same size, and their number of springs between
    members is within 10 % of that of the group: a compact group moves together more
    than a stretched one, whatever it is. They are grown from a random node by
    neighbours that cling more or less to the group.
    """
    nodes = np.unique(nodes)
    if len(nodes) < 2:
        raise ValueError(f"nodes are {nodes.tolist()}; two or more can move together")
    scaled = modes.vector / np.sqrt(modes.eigenvalue)
    observed = _mean_correlation(scaled, nodes)
    groups = random_groups(nodes, laplacian, rng=rng, n_groups=n_groups)
    drawn = np.array([_mean_correlation(scaled, group) for group in groups])
    enough = len(groups) >= FEWEST_GROUPS
    reached = int((drawn >= observed).sum())
    return MovesTogether(
        correlation=observed,
        random_mean=float(drawn.mean()) if enough else np.nan,
        random_high=float(np.percentile(drawn, 95)) if enough else np.nan,
        p_value=(1 + reached) / (1 + len(groups)) if enough else np.nan,
        n_groups=len(groups),
    )


def _mean_correlation(scaled: NDArray[np.float64], nodes: NDArray[np.int64]) -> float:
    """Return the mean over pairs of the correlation that modes give two nodes."""
    rows = scaled[nodes]
    length = np.linalg.norm(rows, axis=1, keepdims=True)
    rows = rows / np.where(length > 0, length, 1)
    n = len(nodes)
    return float((np.sum(rows.sum(axis=0) ** 2) - np.sum(rows**2)) / (n * (n - 1)))


def random_groups(
    nodes: NDArray[np.int64],
    laplacian: csr_array,
    *,
    rng: np.random.Generator,
    n_groups: int,
) -> list[NDArray[np.int64]]:
    """Return random connected groups as large and as compact as a given one.

    Parameters
    ----------
    nodes : ndarray of int, shape (n_members,)
        The group to match.
    laplacian : sparse array, shape (n_nodes, n_nodes)
        Connectivity matrix.
    rng : Generator
        Source of chance.
    n_groups : int
        How many are wanted.

    Returns
    -------
    list of ndarray of int
        Sorted nodes each; fewer groups when 30 times as many attempts do not suffice.
    """
    touches = _neighbours(laplacian)
    wanted = _inner_springs(touches, nodes)
    allowed = max(1.0, SAME_COMPACTNESS * wanted)
    successes = np.ones(len(CLINGING))
    found: list[NDArray[np.int64]] = []
    for _ in range(ATTEMPTS_PER_GROUP * n_groups):
        if len(found) == n_groups:
            break
        choice = int(rng.choice(len(CLINGING), p=successes / successes.sum()))
        group = _grown(touches, len(nodes), CLINGING[choice], rng)
        if group is None:
            continue
        if abs(_inner_springs(touches, group) - wanted) <= allowed:
            successes[choice] += 1
            found.append(np.sort(group))
    return found


def _neighbours(laplacian: csr_array) -> list[NDArray[np.int64]]:
    bounds, ends = laplacian.indptr, laplacian.indices
    rows = [ends[bounds[i] : bounds[i + 1]] for i in range(len(bounds) - 1)]
    return [row[row != i].astype(np.int64) for i, row in enumerate(rows)]


def _inner_springs(touches: list[NDArray[np.int64]], nodes: NDArray[np.int64]) -> int:
    inside = set(nodes.tolist())
    return (
        sum(n in inside for node in nodes.tolist() for n in touches[node].tolist()) // 2
    )


def _grown(
    touches: list[NDArray[np.int64]],
    size: int,
    clinging: float,
    rng: np.random.Generator,
) -> NDArray[np.int64] | None:
    """Return a random connected group, None where its part of the net is too small."""
    first = int(rng.integers(len(touches)))
    group, links = {first}, dict.fromkeys(touches[first].tolist(), 1)
    for chance in rng.random(size - 1):
        if not links:
            return None
        rim = np.fromiter(links, dtype=np.int64, count=len(links))
        count = np.fromiter(links.values(), dtype=np.float64, count=len(links))
        weight = np.cumsum(np.exp(clinging * count))
        node = int(rim[np.searchsorted(weight, chance * weight[-1], side="right")])
        group.add(node)
        del links[node]
        for other in touches[node].tolist():
            if other not in group:
                links[other] = links.get(other, 0) + 1
    return np.array(sorted(group))
