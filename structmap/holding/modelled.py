"""What an elastic network says of units: evidence of a model, never a verdict."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.network import (
    Agreement,
    FollowedProfile,
    MovesTogether,
    NetworkProfiles,
    agreement_with_b_factors,
    build_network,
    find_slow_modes,
    fluctuation_profiles,
    follow_profile,
    judge_moving_together,
    laplacian_of,
)
from structmap.records import store_read_only
from structmap.sites import Sites
from structmap.structure import Assembly, Structure

FEWEST_NODES = 3
RANDOM_GROUPS = 99


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class NetworkEvidence:
    """What an elastic network of the molecule and its crystal says.

    Attributes
    ----------
    profiles : NetworkProfiles
        Fluctuations alone, in the assembly, in the crystal.
    agreement : dict of str to Agreement
        With the B factors of the file, for ``isolated``, ``assembly``, ``crystal``.
    followed : FollowedProfile
        Whether the measured deviations follow the crystal or the assembly.
    site_damping : ndarray of float, shape (n_sites,)
        What packing leaves of the fluctuation of each site, mean over its copies; NaN
        where the network has no node.
    together : tuple of MovesTogether or None
        For each unit whether it moves together in the slow modes; None with fewer than
        two nodes.
    """

    profiles: NetworkProfiles
    agreement: dict[str, Agreement]
    followed: FollowedProfile
    site_damping: NDArray[np.float64]
    together: tuple[MovesTogether | None, ...]

    def __post_init__(self) -> None:
        store_read_only(self, "site_damping", np.float64, (None,))


def ask_network(
    structure: Structure,
    sites: Sites,
    *,
    assemblies: Sequence[Assembly],
    units: Sequence[NDArray[np.int64]],
    deviation: NDArray[np.float64],
    rng: np.random.Generator,
) -> NetworkEvidence | None:
    """Ask an elastic network about sites and units.

    Parameters
    ----------
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    assemblies : sequence of Assembly
        Assemblies whose contacts are complex.
    units : sequence of ndarray of int
        Members of each unit, indices of sites.
    deviation : ndarray of float, shape (n_sites,)
        How far each site is from the baseline; its size is compared with the
        fluctuation. NaN where not measured.
    rng : numpy.random.Generator
        Draws resamples and random groups.

    Returns
    -------
    NetworkEvidence or None
        None when the file has fewer than three residues with CA or P atoms.

    Notes
    -----
    Slow modes are those of the assembly: whether a unit moves together is asked of the
    molecule, and the crystal is left out of that question.
    """
    if not _has_nodes(structure):
        return None
    network = build_network(structure, assemblies)
    profiles = fluctuation_profiles(network)
    laplacian = laplacian_of(network, "assembly")
    modes = find_slow_modes(laplacian)
    nodes = [_nodes_of(members, sites, network.residue) for members in units]
    spread = {
        name: _per_site(getattr(profiles, name), sites, network.residue)
        for name in ("assembly", "crystal", "damping")
    }
    return NetworkEvidence(
        profiles=profiles,
        agreement=agreement_with_b_factors(network, profiles),
        followed=follow_profile(
            np.abs(deviation),
            assembly=spread["assembly"],
            crystal=spread["crystal"],
            rng=rng,
        ),
        site_damping=spread["damping"],
        together=tuple(
            judge_moving_together(
                own, laplacian, modes=modes, rng=rng, n_groups=RANDOM_GROUPS
            )
            if len(own) > 1
            else None
            for own in nodes
        ),
    )


def _has_nodes(structure: Structure) -> bool:
    named = np.isin(structure.atom_name, ("CA", "P")) & (structure.element != "CA")
    own = structure.copy_of_residue[structure.residue_of_atom] >= 0
    return len(np.unique(structure.residue_of_atom[named & own])) >= FEWEST_NODES


def _nodes_of(
    members: NDArray[np.int64], sites: Sites, residue: NDArray[np.int64]
) -> NDArray[np.int64]:
    """Return the nodes of the first copies of the members."""
    own = sites.residue[members]
    return np.flatnonzero(np.isin(residue, own[own >= 0]))


def _per_site(
    profile: NDArray[np.float64], sites: Sites, residue: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Return the mean of a profile over the copies of each site."""
    place = np.searchsorted(residue, sites.copy_residue)
    place = np.minimum(place, len(residue) - 1)
    known = (residue[place] == sites.copy_residue) & np.isfinite(profile[place])
    n_sites = len(sites.name)
    owner = sites.copy_site[known]
    total = np.bincount(owner, weights=profile[place[known]], minlength=n_sites)
    count = np.bincount(owner, minlength=n_sites)
    out = np.full(n_sites, np.nan)
    out[count > 0] = total[count > 0] / count[count > 0]
    return out
