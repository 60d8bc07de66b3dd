"""The plain record of one analysis, which tables, page and words are made from."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from structmap.behaviour import Behaviour, Measurements
from structmap.contacts import Contacts, SiteGraph
from structmap.exposure import Exposure
from structmap.holding import Hold, Packing
from structmap.lattice import LatticeVerdict
from structmap.motional_units.beside import Beside
from structmap.one_process import OneProcess
from structmap.records import store_read_only
from structmap.settings import Settings
from structmap.sites import Sites
from structmap.structure import Structure
from structmap.values import ValueTable


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class MotionalUnit:
    """Connected sites that move and behave alike.

    Attributes
    ----------
    name : str
        ``U1``, ``U2``, … by falling energy.
    members : ndarray of int, shape (n_members,)
        Rising indices of sites.
    energy : float
        Log-likelihood gained by calling the members one unit, less its price.
    contrast : float
        1 less the share of the unit's profile that its ring of neighbours shows.
    verdict : str
        ``supported``, ``beyond-gradient``, ``graded``, ``tentative``; blank when not
        tested.
    p_any, p_place, p_smooth, stability : float
        NaN when not tested.
    fringe : ndarray of int, shape (n_fringe,)
        Sites outside it that often belong.
    lattice : LatticeVerdict
        What holds it together.
    """

    name: str
    members: NDArray[np.int64]
    energy: float
    contrast: float
    verdict: str
    p_any: float
    p_place: float
    p_smooth: float
    stability: float
    fringe: NDArray[np.int64]
    lattice: LatticeVerdict

    def __post_init__(self) -> None:
        store_read_only(self, "members", np.int64, (None,))
        store_read_only(self, "fringe", np.int64, (None,))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class AnalysisRecord:
    """Everything one analysis found.

    Attributes
    ----------
    settings : Settings
        Every choice of the analysis.
    structure : Structure
        The coordinates.
    table : ValueTable
        The measured values.
    sites : Sites
        The measured sites.
    contacts : Contacts
        All contacts of polymer residues within the cutoff, measured or not.
    graph : SiteGraph
        Which sites touch.
    measurements : Measurements
        What is compared.
    behaviour : Behaviour
        Baseline, error scale, who moves.
    units : tuple of MotionalUnit
        The motional units by falling energy.
    membership_probability : ndarray of float, shape (n_sites,)
        Largest over units; NaN where not computed or none overlaps.
    chemistry : ndarray of str, shape (n_contacts,)
        What each contact is made of, ``hydrogen bond 2.9; salt bridge 3.1``.
    exposure : Exposure
        Accessible areas of the residues.
    packing : Packing
        How molecules pack, and what holds each unit.
    processes : tuple of OneProcess
        For each unit whether one process explains it; empty when no model was named.
    process_notes : tuple of str
        On the process over the whole molecule, one sentence each.
    warnings : tuple of str
        What limits the answer, the most important first, one sentence each.
    reason : str
        Why no unit can be told from these data, one sentence; blank when they can.
    beside : Beside
        What other choices, the other part of profiles and other methods show.
    """

    settings: Settings
    structure: Structure
    table: ValueTable
    sites: Sites
    contacts: Contacts
    graph: SiteGraph
    measurements: Measurements
    behaviour: Behaviour
    units: tuple[MotionalUnit, ...]
    membership_probability: NDArray[np.float64]
    chemistry: NDArray[np.str_]
    exposure: Exposure
    packing: Packing
    processes: tuple[OneProcess, ...]
    warnings: tuple[str, ...]
    reason: str = ""
    process_notes: tuple[str, ...] = ()
    beside: Beside = field(default_factory=Beside)

    def __post_init__(self) -> None:
        store_read_only(self, "chemistry", np.str_, (len(self.contacts.kind),))
        store_read_only(
            self, "membership_probability", np.float64, (len(self.sites.name),)
        )

    def process_of(self, unit: MotionalUnit) -> OneProcess | None:
        """Return whether one process explains a unit.

        Parameters
        ----------
        unit : MotionalUnit
            One of the units.

        Returns
        -------
        OneProcess or None
            None when it was not asked.
        """
        return next((p for p in self.processes if p.group == unit.name), None)

    def hold_of(self, unit: MotionalUnit) -> Hold:
        """Return what holds a unit together.

        Parameters
        ----------
        unit : MotionalUnit
            One of the units.

        Returns
        -------
        Hold
            Of that unit.
        """
        return next(hold for hold in self.packing.holds if hold.unit == unit.name)

    def unit_of_site(self) -> NDArray[np.int64]:
        """Return the unit of each site.

        Returns
        -------
        ndarray of int, shape (n_sites,)
            Index into the units, -1 for none.
        """
        out = np.full(len(self.sites.name), -1)
        for index, unit in enumerate(self.units):
            out[unit.members] = index
        return out
