"""What is known of each unit, gathered from the tests and the crystal."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap.behaviour import Measurements
from structmap.contacts import (
    Contacts,
    SiteGraph,
    find_contacts,
    make_site_graph,
)
from structmap.errors import SettingError
from structmap.lattice import judge_lattice
from structmap.motional_units import UnitSearch
from structmap.result import MotionalUnit
from structmap.settings import Settings
from structmap.significance import Judgement, cutoffs_to_vary
from structmap.sites import Sites
from structmap.structure import Assembly, Structure
from structmap.values import ValueTable


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Surroundings:
    """What a unit is held against: the molecule, its sites, its crystal.

    Attributes
    ----------
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    contacts : Contacts
        The contacts.
    graph : SiteGraph
        Which sites touch.
    assemblies : tuple of Assembly
        Those whose contacts are complex.
    """

    structure: Structure
    sites: Sites
    contacts: Contacts
    graph: SiteGraph
    assemblies: tuple[Assembly, ...]


def graphs_at_cutoffs(crystal: Surroundings, cutoff: float) -> tuple[SiteGraph, ...]:
    """Return the graph of sites at the cutoffs over which stability is tested.

    Parameters
    ----------
    crystal : Surroundings
        The cell and its symmetry.
    cutoff : float
        The chosen one in Å.

    Returns
    -------
    tuple of SiteGraph
        One a cutoff.
    """
    cutoffs = cutoffs_to_vary(cutoff, ca_only=crystal.structure.ca_only)
    wide = find_contacts(
        crystal.structure, reach_angstrom=max(cutoffs), assemblies=crystal.assemblies
    )
    return tuple(
        make_site_graph(wide, crystal.sites, cutoff_angstrom=one) for one in cutoffs
    )


def known_baseline(
    table: ValueTable, sites: Sites, measurements: Measurements, settings: Settings
) -> float | NDArray[np.float64] | None:
    """Return the baseline that the settings name: a number or a quantity.

    Parameters
    ----------
    table : ValueTable
        The measured values.
    sites : Sites
        The measured sites.
    measurements : Measurements
        What is compared.
    settings : Settings
        Every choice of the analysis.

    Returns
    -------
    float or ndarray of float or None
        None when the settings name none.

    Raises
    ------
    SettingError
        If it is neither a number nor a quantity that every site has.
    """
    if not settings.baseline:
        return None
    try:
        return float(settings.baseline)
    except ValueError:
        pass
    named = [q for q in table.quantities if q.name == settings.baseline]
    if not named or named[0].value.shape[1] != 1:
        known = ", ".join(q.name for q in table.quantities)
        raise SettingError(
            "options",
            "baseline",
            f"is {settings.baseline!r}, neither a number nor a quantity of the table",
            f"choose a number or one of {known}",
        )
    values = named[0].value[sites.row[measurements.site]]
    if np.isnan(values).any():
        raise SettingError(
            "options",
            "baseline",
            f"is {settings.baseline!r}, which is missing at a measured site",
            "fill it in or leave those sites out with --exclude",
        )
    return values


def describe_units(
    search: UnitSearch, judgement: Judgement | None, crystal: Surroundings
) -> tuple[MotionalUnit, ...]:
    """Return the units with what is known of each.

    Parameters
    ----------
    search : UnitSearch
        What the search found.
    judgement : Judgement or None
        None when chance and stability were not tested.
    crystal : Surroundings
        The cell and its symmetry.

    Returns
    -------
    tuple of MotionalUnit
        By falling energy.
    """
    return tuple(
        MotionalUnit(
            name=f"U{place + 1}",
            members=members,
            energy=float(search.energy[place]),
            contrast=float(search.contrast[place]),
            lattice=judge_lattice(
                members,
                crystal.graph,
                structure=crystal.structure,
                sites=crystal.sites,
                contacts=crystal.contacts,
                assemblies=crystal.assemblies,
            ),
            **_evidence(judgement, place),
        )
        for place, members in enumerate(search.members)
    )


def _evidence(judgement: Judgement | None, place: int) -> dict[str, Any]:
    names = ("verdict", "p_any", "p_place", "p_smooth", "stability", "fringe")
    if judgement is None:
        nothing = ("", *(np.nan,) * 4, np.zeros(0, dtype=np.int64))
        return dict(zip(names, nothing, strict=True))
    return {name: getattr(judgement.units[place], name) for name in names}


def spread_membership(
    search: UnitSearch, judgement: Judgement | None, n_sites: int
) -> NDArray[np.float64]:
    """Return the membership probability of every site.

    Parameters
    ----------
    search : UnitSearch
        What the search found.
    judgement : Judgement or None
        None when chance and stability were not tested.
    n_sites : int
        Sites of the match.

    Returns
    -------
    ndarray of float, shape (n_sites,)
        NaN where not computed.
    """
    if judgement is None:
        return np.full(n_sites, np.nan)
    return spread_over_all(judgement.membership, search.site, n_sites)


def spread_over_all(
    values: NDArray[np.float64], site: NDArray[np.int64], n_sites: int
) -> NDArray[np.float64]:
    """Return values of some sites among all sites.

    Parameters
    ----------
    values : ndarray of float, shape (n,)
        One a site.
    site : ndarray of int, shape (n,)
        Which sites these are.
    n_sites : int
        Sites of the match.

    Returns
    -------
    ndarray of float, shape (n_sites,)
        NaN where there is none.
    """
    out = np.full(n_sites, np.nan)
    out[site] = values
    return out
