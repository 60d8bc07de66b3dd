"""Helices and strands from the backbone, for files that do not record them."""

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from structmap.atom_pairs import first_model_of, keep_atoms, one_conformation
from structmap.structure import Structure

# Kabsch and Sander (1983): charges of 0.42 and 0.20 e, 332 Å kcal/mol/e².
ENERGY_FACTOR = 0.42 * 0.20 * 332.0
BOND_ENERGY = -0.5  # kcal/mol
AMIDE_ANGSTROM = 1.01
LONGEST_PEPTIDE_BOND_ANGSTROM = 2.5
# An energy below -0.5 needs O and N this close whatever their directions.
FARTHEST_PARTNER_ANGSTROM = 5.2
LONGEST_BULGE = 5  # steps along one strand, with at most 2 along the other
# Labesse, Colloc'h, Pothier and Mornon (1997): distances in Å from CA i to CA i + 2,
# i + 3, i + 4, the angle at i + 1 and the dihedral angle from i in degrees, each with
# what it may differ by.
CA_HELIX = ((5.5, 0.5), (5.3, 0.5), (6.4, 0.6), (89.0, 12.0), (50.0, 20.0))
CA_STRAND = ((6.7, 0.6), (9.9, 0.9), (12.4, 1.1), (124.0, 14.0), (-170.0, 45.0))
LONGEST_CA_STEP_ANGSTROM = 4.2


def assign_secondary_structure(structure: Structure) -> NDArray[np.str_]:
    """Return helices and strands as the geometry of the backbone shows them.

    Parameters
    ----------
    structure : Structure
        Coordinates as read; of an ensemble the first model is used.

    Returns
    -------
    ndarray of str, shape (n_residues,)
        ``H`` for a residue in a helix (α, 3-10 or π), ``E`` in a ladder of strands,
        blank otherwise, as `Structure.secondary_structure` has it.

    Notes
    -----
    The rule of Kabsch and Sander [1]_: a hydrogen bond where the electrostatic energy
    of C=O and N-H is below -0.5 kcal/mol, the hydrogen put 1.01 Å from N opposite to
    the C=O before it; two turns in a row make a helix, two bridges in a row, bulges
    allowed, a strand. A lone bridge is not a strand. Strands that only images of the
    molecule bring together are not seen. For a file of CA atoms alone the distances and
    angles of Labesse and others [2]_ decide (their limits from memory).

    References
    ----------
    .. [1] Kabsch and Sander, Biopolymers 22, 2577-2637 (1983).
    .. [2] Labesse, Colloc'h, Pothier and Mornon, CABIOS 13, 291-295 (1997).
    """
    structure = first_model_of(structure)
    structure = keep_atoms(structure, one_conformation(structure))
    if structure.ca_only:
        return _from_ca(structure)
    chain = _chain_segments(structure)
    bonds = _hydrogen_bonds(structure, chain)
    out = np.full(len(chain), "", dtype="<U1")
    out[_helix(bonds, chain, 4)] = "H"
    out[_strands(bonds, chain) & (out == "")] = "E"
    for step in (3, 5):
        free = out == ""
        out[_helix(bonds, chain, step, only=free)] = "H"
    return out


def _atom_of_residue(structure: Structure, name: str) -> NDArray[np.float64]:
    """Return where an atom of each residue is, NaN where it is missing."""
    out = np.full((len(structure.kind_of_residue), 3), np.nan)
    atoms = np.flatnonzero(structure.atom_name == name)[::-1]
    out[structure.residue_of_atom[atoms]] = structure.position[atoms]
    return out


def _distance(
    one: NDArray[np.float64], two: NDArray[np.float64]
) -> NDArray[np.float64]:
    return np.asarray(np.sqrt(((one - two) ** 2).sum(axis=-1)))


def _chain_segments(structure: Structure) -> NDArray[np.int64]:
    """Return a number for each stretch of bonded residues, -1 outside peptides."""
    carbon, nitrogen = (_atom_of_residue(structure, name) for name in ("C", "N"))
    apart = _distance(carbon[:-1], nitrogen[1:])
    copy = structure.copy_of_residue
    bonded = (apart <= LONGEST_PEPTIDE_BOND_ANGSTROM) & (copy[1:] == copy[:-1])
    segment = np.cumsum(np.concatenate([[True], ~bonded]))
    whole = ~np.isnan(_atom_of_residue(structure, "CA")[:, 0]) & (copy >= 0)
    return np.asarray(np.where(whole, segment, -1))


class _Bonds:
    """Hydrogen bonds from the N-H of one residue to the C=O of another."""

    def __init__(
        self, acceptor: NDArray[np.int64], donor: NDArray[np.int64], n_residues: int
    ) -> None:
        self.acceptor, self.donor, self.n_residues = acceptor, donor, n_residues
        self._keys = np.sort(acceptor * n_residues + donor)

    def has(
        self, acceptor: NDArray[np.int64], donor: NDArray[np.int64]
    ) -> NDArray[np.bool_]:
        """Return whether these residues are bonded so; not beyond the ends."""
        inside = (acceptor >= 0) & (donor >= 0)
        inside &= (acceptor < self.n_residues) & (donor < self.n_residues)
        return inside & np.isin(acceptor * self.n_residues + donor, self._keys)


def _hydrogen_bonds(structure: Structure, chain: NDArray[np.int64]) -> _Bonds:
    nitrogen, carbon, oxygen = (
        _atom_of_residue(structure, name) for name in ("N", "C", "O")
    )
    hydrogen = np.full_like(nitrogen, np.nan)
    carbonyl = carbon[:-1] - oxygen[:-1]
    carbonyl *= AMIDE_ANGSTROM / _distance(carbon[:-1], oxygen[:-1])[:, None]
    gives = (chain[1:] == chain[:-1]) & (structure.auth_comp_id[1:] != "PRO")
    hydrogen[1:][gives] = nitrogen[1:][gives] + carbonyl[gives]
    donors = np.flatnonzero(~np.isnan(hydrogen[:, 0]))
    takes = ~np.isnan(oxygen[:, 0]) & ~np.isnan(carbon[:, 0]) & (chain >= 0)
    acceptors = np.flatnonzero(takes)
    if not len(donors) or not len(acceptors):
        none = np.zeros(0, dtype=np.int64)
        return _Bonds(none, none, len(chain))
    near = cKDTree(nitrogen[donors]).sparse_distance_matrix(
        cKDTree(oxygen[acceptors]), FARTHEST_PARTNER_ANGSTROM, output_type="ndarray"
    )
    donor, acceptor = donors[near["i"]], acceptors[near["j"]]
    energy = ENERGY_FACTOR * (
        1 / near["v"]
        + 1 / _distance(carbon[acceptor], hydrogen[donor])
        - 1 / _distance(oxygen[acceptor], hydrogen[donor])
        - 1 / _distance(carbon[acceptor], nitrogen[donor])
    )
    step = donor - acceptor
    kept = (energy < BOND_ENERGY) & ~((step >= 0) & (step <= 1))
    return _Bonds(acceptor[kept], donor[kept], len(chain))


def _helix(
    bonds: _Bonds,
    chain: NDArray[np.int64],
    step: int,
    *,
    only: NDArray[np.bool_] | None = None,
) -> NDArray[np.bool_]:
    """Return residues inside two turns in a row, where all of them are free."""
    first = np.arange(len(chain) - step)
    turn = np.zeros(len(chain), dtype=np.bool_)
    turn[first] = (chain[first] == chain[first + step]) & (chain[first] >= 0)
    turn[first] &= bonds.has(first, first + step)
    starts = np.flatnonzero(turn[1:] & turn[:-1]) + 1
    inside = starts[:, None] + np.arange(step)
    if only is not None:
        inside = inside[only[inside].all(axis=1)]
    out = np.zeros(len(chain), dtype=np.bool_)
    out[inside] = True
    return out


def _strands(bonds: _Bonds, chain: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return residues of ladders of at least two bridges, bulges included."""
    out = np.zeros(len(chain), dtype=np.bool_)
    for way in (1, -1):
        one, two = _bridges(bonds, chain, way)
        known = one * len(chain) + two
        for step_1 in range(1, LONGEST_BULGE + 1):
            for step_2 in range(1, LONGEST_BULGE + 1):
                if min(step_1, step_2) > 2:
                    continue
                end_1, end_2 = one + step_1, two + way * step_2
                goes_on = np.isin(end_1 * len(chain) + end_2, known)
                goes_on &= _same_segment(chain, one, end_1)
                goes_on &= _same_segment(chain, two, end_2)
                for first, step in ((one, step_1), (two, way * step_2)):
                    span = np.arange(0, step + np.sign(step), np.sign(step))
                    out[first[goes_on][:, None] + span] = True
    return out


def _bridges(
    bonds: _Bonds, chain: NDArray[np.int64], way: int
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return parallel (way 1) or antiparallel (-1) bridges, each from both sides."""
    acceptor, donor = bonds.acceptor, bonds.donor
    if way == 1:
        one, two = acceptor + 1, donor
        holds = bonds.has(two, one + 1)
        one, two = one[holds], two[holds]
    else:
        narrow = bonds.has(donor, acceptor)
        wide = bonds.has(donor - 2, acceptor + 2)
        one = np.concatenate([acceptor[narrow], acceptor[wide] + 1])
        two = np.concatenate([donor[narrow], donor[wide] - 1])
    far = np.abs(one - two) >= 3
    for side in (one, two):
        far &= _same_segment(chain, side - 1, side) & _same_segment(
            chain, side, side + 1
        )
    one, two = one[far], two[far]
    return np.concatenate([one, two]), np.concatenate([two, one])


def _same_segment(
    chain: NDArray[np.int64], one: NDArray[np.int64], two: NDArray[np.int64]
) -> NDArray[np.bool_]:
    last = len(chain) - 1
    inside = (np.minimum(one, two) >= 0) & (np.maximum(one, two) <= last)
    left, right = chain[np.clip(one, 0, last)], chain[np.clip(two, 0, last)]
    return np.asarray(inside & (left == right) & (left >= 0))


def _from_ca(structure: Structure) -> NDArray[np.str_]:
    """Return helices and strands from the CA atoms alone."""
    distances, angle, dihedral = _ca_measures(structure)
    out = np.full(len(angle), "", dtype="<U1")
    for letter, limits, shortest in (("E", CA_STRAND, 3), ("H", CA_HELIX, 5)):
        by_distance = _within(distances, limits[:3]).all(axis=1)
        turned = np.column_stack([angle, (dihedral - limits[4][0] + 180) % 360])
        by_angle = _within(turned, (limits[3], (180.0, limits[4][1]))).all(axis=1)
        fits = np.logical_or(by_distance, by_angle)
        out[_long_runs(fits, shortest)] = letter
    return out


def _within(
    value: NDArray[np.float64], limits: tuple[tuple[float, float], ...]
) -> NDArray[np.bool_]:
    middle, slack = np.array(limits).T
    return np.asarray(np.abs(value - middle) <= slack)


def _ca_measures(
    structure: Structure,
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return distances, angle and dihedral from the residue before; NaN at ends."""
    place = _atom_of_residue(structure, "CA")
    copy, step = structure.copy_of_residue, _distance(place[:-1], place[1:])
    joined = (step <= LONGEST_CA_STEP_ANGSTROM) & (copy[1:] == copy[:-1])
    segment = np.cumsum(np.concatenate([[True], ~joined]))

    def ahead(steps: int) -> NDArray[np.float64]:
        to = np.arange(len(place)) + steps
        inside = np.clip(to, 0, len(place) - 1)
        same = (to == inside) & (segment[inside] == segment)
        return np.where(same[:, None], place[inside], np.nan)

    before, after, second, third = ahead(-1), ahead(1), ahead(2), ahead(3)
    distances = np.column_stack([_distance(before, p) for p in (after, second, third)])
    angle = _angle(before - place, after - place)
    normals = (
        np.cross(place - before, after - place),
        np.cross(after - place, second - after),
    )
    side = np.einsum("ij,ij->i", normals[0], second - after)
    return distances, angle, np.copysign(_angle(*normals), side)


def _angle(one: NDArray[np.float64], two: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return angles in degrees."""
    size = np.linalg.norm(one, axis=1) * np.linalg.norm(two, axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        cosine = np.einsum("ij,ij->i", one, two) / size
    return np.asarray(np.degrees(np.arccos(np.clip(cosine, -1, 1))))


def _long_runs(holds: NDArray[np.bool_], shortest: int) -> NDArray[np.bool_]:
    """Return the places in runs of at least this length."""
    edge = np.diff(np.concatenate([[False], holds, [False]]).astype(np.int64))
    begin, end = np.flatnonzero(edge == 1), np.flatnonzero(edge == -1)
    long = end - begin >= shortest
    mark = np.zeros(len(holds) + 1, dtype=np.int64)
    np.add.at(mark, begin[long], 1)
    np.add.at(mark, end[long], -1)
    return np.asarray(np.cumsum(mark[:-1]) > 0)
