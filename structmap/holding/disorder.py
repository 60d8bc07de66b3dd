"""Whether one poorly ordered side chain decides that a unit holds together."""

import numpy as np
from numpy.typing import NDArray

from structmap.contacts import LATTICE, Contacts, contacts_where, make_site_graph
from structmap.lattice import SHARE_NEEDED, connected_pieces
from structmap.sites import Sites
from structmap.structure import LOW_CONFIDENCE, POLYMER, Structure

BACKBONE = (
    *("N", "CA", "C", "O", "OXT", "P", "OP1", "OP2", "O5'", "C5'", "C4'", "O4'"),
    *("C3'", "O3'", "C2'", "O2'", "C1'"),
)
# Common practice, no source.
TIMES_MEDIAN_B = 2.0
LOW_OCCUPANCY = 0.5


def find_deciding_side_chains(
    members: NDArray[np.int64],
    structure: Structure,
    *,
    sites: Sites,
    contacts: Contacts,
) -> tuple[int, ...]:
    """Find poorly ordered side chains of which one alone holds a unit together.

    Parameters
    ----------
    members : ndarray of int, shape (n_members,)
        Indices of sites.
    structure : Structure
        The coordinates.
    sites : Sites
        The measured sites.
    contacts : Contacts
        Within the cutoff.

    Returns
    -------
    tuple of int
        Residues, rising.

    Notes
    -----
    A side-chain atom is poorly ordered when its B factor is above twice the median of
    the atoms of its chain, or its occupancy below one half. A side chain decides when
    without the contacts whose closest atom is such an atom of it, fewer than 80 % of
    the other members stay together that are together now.
    """
    poor = poorly_ordered_atoms(structure)
    own = sites.copy_residue[np.isin(sites.copy_site, members)]
    inside = np.isin(contacts.residue_1, own) & np.isin(contacts.residue_2, own)
    ends = np.stack([contacts.residue_1, contacts.residue_2])
    atoms = np.stack([contacts.atom_1, contacts.atom_2])
    weak = inside & poor[atoms]
    deciding = [
        residue
        for residue in np.unique(ends[weak]).tolist()
        if _decides(
            residue,
            members,
            sites,
            contacts=contacts,
            touched=(weak & (ends == residue)).any(axis=0),
        )
    ]
    return tuple(deciding)


def poorly_ordered_atoms(structure: Structure) -> NDArray[np.bool_]:
    """Return which side-chain atoms are poorly ordered.

    Parameters
    ----------
    structure : Structure
        The coordinates.

    Returns
    -------
    ndarray of bool, shape (n_atoms,)
        B factor above twice the median of the chain, or occupancy below one half; in a
        predicted model confidence below 70.
    """
    residue = structure.residue_of_atom
    side = (structure.kind_of_residue[residue] == POLYMER) & ~np.isin(
        structure.atom_name, BACKBONE
    )
    chain = structure.copy_of_residue[residue]
    if structure.is_predicted:
        return np.asarray(side & (structure.b_iso < LOW_CONFIDENCE))
    median = np.full(len(structure.chain_copies) + 1, np.inf)
    for index in range(len(structure.chain_copies)):
        b_factors = structure.b_iso[chain == index]
        median[index] = np.median(b_factors) if len(b_factors) else np.inf
    poor = structure.b_iso > TIMES_MEDIAN_B * median[chain]
    return np.asarray(side & (poor | (structure.occupancy < LOW_OCCUPANCY)))


def _decides(
    residue: int,
    members: NDArray[np.int64],
    sites: Sites,
    *,
    contacts: Contacts,
    touched: NDArray[np.bool_],
) -> bool:
    """Return whether the others fall apart without some contacts of a residue."""
    left = contacts_where(contacts, ~touched)
    graph = make_site_graph(left, sites, cutoff_angstrom=contacts.reach_angstrom)
    own = set(sites.copy_site[sites.copy_residue == residue].tolist())
    largest = connected_pieces(members, graph, highest_kind=LATTICE)[0]
    n_others = len(set(members.tolist()) - own)
    return len(set(largest) - own) < SHARE_NEEDED * n_others
