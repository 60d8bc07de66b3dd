"""What is known of the contacts that hold motional units together."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.cell import CellComparison
from structmap.chemistry import Chemistry
from structmap.holding.modelled import NetworkEvidence
from structmap.lattice import NumberedContacts
from structmap.quotient import AssemblyExtent
from structmap.records import store_read_only
from structmap.structure import Assembly
from structmap.weakest import WeakestLink

CLOSE_CONTACT = "close contact"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Hold:
    """What holds one motional unit together, and how much that depends on.

    Attributes
    ----------
    unit : str
        Name of the unit.
    closes : str
        ``finite``, ``ring``, ``rod``, ``layer`` or ``net``: what the unit closes to
        with the kinds of contact that hold it.
    order : int
        Number of images in a ring.
    periods : ndarray of float, shape (n_periods, 3)
        Translations in cell edges after which an endless one comes back.
    weakest : WeakestLink or None
        The fewest contacts without which it falls apart; None for a lone member.
    link_kinds : tuple of (str, int)
        What these contacts can be, by the first kind that holds for each, and how many.
    link_images : tuple of str
        Operators with shifts, ``-x,y+1/2,-z+1/2 [1 0 0]``, of the neighbours in the
        crystal that these contacts lead to.
    link_chains : tuple of str
        Chains of the assembly that they join, where they are complex contacts.
    buried_area : float
        Area in Å² that its members bury across lattice contacts, both sides together;
        NaN in a file of CA atoms.
    largest_without_lattice, largest_by_lattice_alone : int
        Members that stay together when lattice contacts are taken away, and when only
        these are left.
    verdict_at : tuple of (float, str)
        Cutoffs in Å and the verdict with each.
    is_marginal : bool
        Whether contacts of a closer kind would hold it within 1 Å more.
    loose_residues : tuple of int
        Residues of which a single poorly ordered side chain decides that it holds.
    firm_pieces : tuple of tuple of int
        In a predicted model the pieces, largest first, into which it falls without
        contacts to residues of low confidence; empty where it stays whole.
    """

    unit: str
    closes: str
    order: int
    periods: NDArray[np.float64]
    weakest: WeakestLink | None
    link_kinds: tuple[tuple[str, int], ...]
    link_images: tuple[str, ...]
    link_chains: tuple[str, ...]
    buried_area: float
    largest_without_lattice: int
    largest_by_lattice_alone: int
    verdict_at: tuple[tuple[float, str], ...]
    is_marginal: bool
    loose_residues: tuple[int, ...]
    firm_pieces: tuple[tuple[int, ...], ...]

    def __post_init__(self) -> None:
        store_read_only(self, "periods", np.float64, (None, 3))


@dataclass(frozen=True, slots=True, kw_only=True)
class Neighbour:
    """A neighbour in the crystal, with what lies between it and the molecule.

    Attributes
    ----------
    numeral : str
        Roman numeral.
    text : str
        Operator with shift.
    n_contacts, n_atom_pairs : int
        Residue contacts and atom pairs within the cutoff.
    area : float
        Buried area in Å², both sides together; NaN in a file of CA atoms.
    """

    numeral: str
    text: str
    n_contacts: int
    n_atom_pairs: int
    area: float


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Packing:
    """How molecules pack, and what that has to do with the units.

    Attributes
    ----------
    assemblies : tuple of Assembly
        Those whose contacts are complex.
    chemistry : Chemistry
        What the geometry of each contact is compatible with.
    numbered : NumberedContacts
        The crystal's neighbours by numeral, and the neighbour of each contact.
    extent : AssemblyExtent
        How far their contacts go.
    neighbours : tuple of Neighbour
        In the crystal, in the order of their numerals.
    holds : tuple of Hold
        One for each unit, in the same order.
    sample : CellComparison or None
        The crystal of the sample against that of the file; None when not given.
    network : NetworkEvidence or None
        What an elastic network says; None when not asked.
    """

    assemblies: tuple[Assembly, ...]
    chemistry: Chemistry
    numbered: NumberedContacts
    extent: AssemblyExtent
    neighbours: tuple[Neighbour, ...]
    holds: tuple[Hold, ...]
    sample: CellComparison | None
    network: NetworkEvidence | None
