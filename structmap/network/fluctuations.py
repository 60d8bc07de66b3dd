"""Profiles of fluctuation: alone, in the assembly, in the crystal."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from structmap.network.build import SURROUNDINGS, ElasticNetwork, laplacian_of
from structmap.network.inversion import fluctuations_of
from structmap.records import store_read_only

BOOTSTRAPS = 1000
FEWEST_VALUES = 3


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class NetworkProfiles:
    """Mean square fluctuations of a Gaussian network.

    Attributes
    ----------
    residue : ndarray of int, shape (n_nodes,)
        Residues of the structure.
    isolated, assembly, crystal : ndarray of float, shape (n_nodes,)
        In units of three kT over the spring constant.
    damping : ndarray of float, shape (n_nodes,)
        Crystal over assembly: what packing leaves of the fluctuation; NaN for a node
        that nothing holds in the assembly.
    """

    residue: NDArray[np.int64]
    isolated: NDArray[np.float64]
    assembly: NDArray[np.float64]
    crystal: NDArray[np.float64]
    damping: NDArray[np.float64]

    def __post_init__(self) -> None:
        store_read_only(self, "residue", np.int64, (None,))
        for name in (*SURROUNDINGS, "damping"):
            store_read_only(self, name, np.float64, (len(self.residue),))


@dataclass(frozen=True, slots=True, kw_only=True)
class Agreement:
    """How well a profile agrees with values.

    Attributes
    ----------
    pearson, rank : float
        Linear and rank correlation; NaN when the values do not vary.
    n_values : int
        Nodes that both have.
    """

    pearson: float
    rank: float
    n_values: int


def fluctuation_profiles(network: ElasticNetwork) -> NetworkProfiles:
    """Return the fluctuations of each residue: alone, in the assembly, in the crystal.

    Parameters
    ----------
    network : ElasticNetwork
        The network.

    Returns
    -------
    NetworkProfiles
        Model evidence: springs of one strength, no side chains, no solvent.
    """
    found = {
        name: fluctuations_of(laplacian_of(network, name)) for name in SURROUNDINGS
    }
    held = found["assembly"] > 0
    damping = np.full(len(held), np.nan)
    damping[held] = found["crystal"][held] / found["assembly"][held]
    return NetworkProfiles(residue=network.residue, damping=damping, **found)


def correlate(first: ArrayLike, second: ArrayLike) -> Agreement:
    """Return linear and rank correlation of two profiles.

    Parameters
    ----------
    first, second : array_like of float, shape (n,)
        NaN leaves a pair out.

    Returns
    -------
    Agreement
        NaN with fewer than three pairs or when one profile does not vary.
    """
    pairs: NDArray[np.float64] = np.array([first, second], dtype=np.float64)
    pairs = pairs[:, np.isfinite(pairs).all(axis=0)]
    n_values = pairs.shape[1]
    if n_values < FEWEST_VALUES or (pairs.max(axis=1) == pairs.min(axis=1)).any():
        return Agreement(pearson=np.nan, rank=np.nan, n_values=n_values)
    return Agreement(
        pearson=_pearson(pairs),
        rank=_pearson(_ranks(pairs)),
        n_values=n_values,
    )


def _ranks(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Rank along the last axis; ties share their mean rank."""
    flat = pd.DataFrame(values.reshape(-1, values.shape[-1]).T)
    out: NDArray[np.float64] = flat.rank().to_numpy().T.reshape(values.shape)
    return out


def _pearson(pairs: NDArray[np.float64]) -> float:
    centred = pairs - pairs.mean(axis=1, keepdims=True)
    spread = np.sqrt((centred**2).sum(axis=1))
    return float(centred[0] @ centred[1] / (spread[0] * spread[1]))


def agreement_with_b_factors(
    network: ElasticNetwork, profiles: NetworkProfiles
) -> dict[str, Agreement]:
    """Return how well the profiles agree with the B factors of the file.

    Parameters
    ----------
    network : ElasticNetwork
        The network.
    profiles : NetworkProfiles
        Of that network.

    Returns
    -------
    dict of str to Agreement
        For ``isolated``, ``assembly`` and ``crystal``. B factors also hold movements of
        the whole molecule and restraints of the refinement.
    """
    return {
        name: correlate(getattr(profiles, name), network.b_iso) for name in SURROUNDINGS
    }


@dataclass(frozen=True, slots=True, kw_only=True)
class FollowedProfile:
    """Whether values follow the profile of the crystal or of the assembly.

    Attributes
    ----------
    follows : {'crystal', 'assembly', 'undecided'}
        Undecided when 0 lies in the interval.
    difference, low, high : float
        Rank correlation with the crystal less that with the assembly, and its 95 %
        interval.
    assembly, crystal : Agreement
        With each profile.
    """

    follows: Literal["crystal", "assembly", "undecided"]
    difference: float
    low: float
    high: float
    assembly: Agreement
    crystal: Agreement


def follow_profile(
    values: ArrayLike,
    *,
    assembly: ArrayLike,
    crystal: ArrayLike,
    rng: np.random.Generator,
    n_bootstraps: int = BOOTSTRAPS,
) -> FollowedProfile:
    """Tell whether measured values follow the crystal's or the assembly's profile.

    Parameters
    ----------
    values : array_like of float, shape (n_sites,)
        Larger means more motion; NaN where not measured.
    assembly, crystal : array_like of float, shape (n_sites,)
        Fluctuations of the same sites.
    rng : Generator
        Source of chance.
    n_bootstraps : int, default 1000
        Resamplings of the sites.

    Returns
    -------
    FollowedProfile
        Undecided as well with fewer than ten sites.
    """
    table = np.array([values, assembly, crystal], dtype=np.float64)
    table = table[:, np.isfinite(table).all(axis=0)]
    with_assembly = correlate(table[0], table[1])
    with_crystal = correlate(table[0], table[2])
    n_sites = table.shape[1]
    drawn = rng.integers(0, max(n_sites, 1), size=(n_bootstraps, n_sites))
    differences = _rank_differences(table[:, drawn])
    low, high = -np.inf, np.inf
    if n_sites >= 10 and np.isfinite(differences).any():
        low, high = np.nanpercentile(differences, [2.5, 97.5])
    follows: Literal["crystal", "assembly", "undecided"] = "undecided"
    if low > 0:
        follows = "crystal"
    elif high < 0:
        follows = "assembly"
    return FollowedProfile(
        follows=follows,
        difference=with_crystal.rank - with_assembly.rank,
        low=float(low),
        high=float(high),
        assembly=with_assembly,
        crystal=with_crystal,
    )


def _rank_differences(tables: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return rank correlation of rows 0 and 2 less that of rows 0 and 1, by resample.

    `tables` has shape (3, n_resamples, n_sites); NaN where a resample does not vary.
    """
    ranks = _ranks(tables)
    ranks = ranks - ranks.mean(axis=2, keepdims=True)
    spread = np.sqrt((ranks**2).sum(axis=2))
    varies = (spread > 0).all(axis=0)
    out = np.full(tables.shape[1], np.nan)
    values, assembly, crystal = ranks[:, varies]
    by_crystal = (values * crystal).sum(axis=1) / spread[2, varies]
    by_assembly = (values * assembly).sum(axis=1) / spread[1, varies]
    out[varies] = (by_crystal - by_assembly) / spread[0, varies]
    return out
