"""Gaussian network of a molecule alone, in its assembly and in its crystal."""

from structmap.network.build import (
    SURROUNDINGS,
    ElasticNetwork,
    Surroundings,
    build_network,
    laplacian_of,
)
from structmap.network.fluctuations import (
    Agreement,
    FollowedProfile,
    NetworkProfiles,
    agreement_with_b_factors,
    correlate,
    fluctuation_profiles,
    follow_profile,
)
from structmap.network.inversion import fluctuations_of, selected_inverse_diagonal
from structmap.network.modes import (
    MovesTogether,
    SlowModes,
    find_slow_modes,
    judge_moving_together,
)

__all__ = [
    "SURROUNDINGS",
    "Agreement",
    "ElasticNetwork",
    "FollowedProfile",
    "MovesTogether",
    "NetworkProfiles",
    "SlowModes",
    "Surroundings",
    "agreement_with_b_factors",
    "build_network",
    "correlate",
    "find_slow_modes",
    "fluctuation_profiles",
    "fluctuations_of",
    "follow_profile",
    "judge_moving_together",
    "laplacian_of",
    "selected_inverse_diagonal",
]
