"""What holds a motional unit together: weakest link, area, ablation, sensitivity."""

from structmap.holding.disorder import (
    find_deciding_side_chains,
    poorly_ordered_atoms,
)
from structmap.holding.finding import (
    LEVEL_OF_VERDICT,
    Held,
    describe_hold,
    prepare_holding,
)
from structmap.holding.modelled import NetworkEvidence, ask_network
from structmap.holding.neighbours import list_neighbours
from structmap.holding.record import CLOSE_CONTACT, Hold, Neighbour, Packing

__all__ = [
    "CLOSE_CONTACT",
    "LEVEL_OF_VERDICT",
    "Held",
    "Hold",
    "Neighbour",
    "NetworkEvidence",
    "Packing",
    "ask_network",
    "describe_hold",
    "find_deciding_side_chains",
    "list_neighbours",
    "poorly_ordered_atoms",
    "prepare_holding",
]
