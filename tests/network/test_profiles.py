"""Fluctuations alone, in the assembly and in the crystal."""

from dataclasses import replace

import numpy as np
import pytest

from structmap.contacts import choose_assemblies
from structmap.network import (
    SURROUNDINGS,
    agreement_with_b_factors,
    build_network,
    correlate,
    fluctuation_profiles,
    fluctuations_of,
    follow_profile,
    laplacian_of,
)
from tests.quotient.cases import archive, contacts_of

# Correlation with the B factors of CA atoms within 7.3 Å: alone, assembly, crystal.
# From an independent program for dense matrices, to the three digits it printed.
CORRELATIONS = [
    ("1orc.pdb", "auto", (0.776, 0.776, 0.798)),
    ("1gbt.cif.gz", "auto", (0.447, 0.447, 0.651)),
    ("4cup.cif.gz", "auto", (0.422, 0.810, 0.864)),
    ("4zhl.cif.gz", "auto", (0.716, 0.716, 0.722)),
    ("3wup.json.gz", "2", (0.673, 0.848, 0.726)),
    ("1a8o.pdb.gz", "auto", (0.367, 0.453, 0.447)),
    ("1a7g.cif.gz", "auto", (0.513, 0.525, 0.560)),
    ("2xhe.pdb.gz", "auto", (0.715, 0.715, 0.739)),
]


def network_of(data_folder, name, choice="auto"):
    structure = archive(data_folder, name)
    return structure, build_network(structure, choose_assemblies(structure, choice))


@pytest.mark.parametrize(("name", "choice", "expected"), CORRELATIONS)
def test_correlation_with_b_factors(data_folder, name, choice, expected):
    _, network = network_of(data_folder, name, choice)
    found = agreement_with_b_factors(network, fluctuation_profiles(network))
    for surroundings, value in zip(SURROUNDINGS, expected, strict=True):
        assert round(found[surroundings].pearson, 3) == value


def test_large_crystal_agrees_with_the_published_kind_of_figure(data_folder):
    _, network = network_of(data_folder, "6wg6.cif.gz")
    for surroundings, value in (("isolated", 0.601), ("crystal", 0.574)):
        profile = fluctuations_of(laplacian_of(network, surroundings))
        assert round(correlate(profile, network.b_iso).pearson, 3) == value


@pytest.mark.parametrize(
    ("name", "n_cells"),
    [("1orc.pdb", 1), ("5e5z.pdb", 2), ("3wup.json.gz", 1), ("4oz7.pdb", 1)],
)
def test_crystal_is_the_even_part_of_a_supercell(data_folder, name, n_cells):
    """All images in a block of cells with joined ends, springs by plain distances.

    Motions in which all images of a residue move alike form a subspace that the big
    matrix maps to itself; in it the matrix must be that of the quotient graph.
    """
    structure, network = network_of(data_folder, name)
    crystal = structure.crystal
    atoms = [
        np.flatnonzero(
            (structure.residue_of_atom == residue) & (structure.atom_name == "CA")
        )[0]
        for residue in network.residue
    ]
    fraction = structure.position[atoms] @ crystal.fractionalisation.T
    fraction = fraction + crystal.fractionalisation_shift
    images = np.einsum("kij,aj->kai", crystal.rotations, fraction)
    images = (images + crystal.translations[:, None] / 24) % 1
    block = whole_steps(range(n_cells))
    everything = (images[None] + block[:, None, None]).reshape(-1, 3)
    n_atoms, n_all = len(atoms), len(everything)
    springs = np.zeros((n_all, n_all))
    for shift in n_cells * whole_steps(range(-1, 2)):
        gap = everything[:, None] - everything[None] - shift
        apart = np.linalg.norm(gap @ crystal.orthogonalisation.T, axis=2)
        springs += apart <= 7.3
    np.fill_diagonal(springs, 0)  # an atom and its own image move alike
    big = np.diag(springs.sum(axis=1)) - springs
    n_images = n_all // n_atoms
    even = np.tile(np.eye(n_atoms), (n_images, 1)) / np.sqrt(n_images)
    small = laplacian_of(network, "crystal").toarray()
    np.testing.assert_allclose(big @ even, even @ small, atol=1e-8)
    spectrum = np.linalg.eigvalsh(big)
    for value in np.linalg.eigvalsh(small):
        assert np.abs(spectrum - value).min() < 1e-8


def whole_steps(values):
    return np.stack(np.meshgrid(*[values] * 3, indexing="ij"), axis=-1).reshape(-1, 3)


def test_packing_damps_most_where_the_lattice_touches(data_folder):
    """Median damping 0.70 to 0.88 at lattice sites, 0.91 to 0.98 elsewhere.

    Over eight crystals, from an independent program; 4CUP is one of the eight.
    """
    structure = archive(data_folder, "4cup.cif.gz")
    network = build_network(structure, choose_assemblies(structure, "auto"))
    profiles = fluctuation_profiles(network)
    contacts = contacts_of(structure)
    lattice = contacts.kind == 2
    ends = [contacts.residue_1[lattice], contacts.residue_2[lattice]]
    touched = np.isin(network.residue, ends)
    inside = np.median(profiles.damping[~touched])
    assert 0.70 <= np.median(profiles.damping[touched]) <= 0.88
    assert 0.91 <= inside <= 0.98


def test_no_crystal_means_that_the_crystal_changes_nothing(data_folder):
    _, network = network_of(data_folder, "1as5.cif.gz")
    profiles = fluctuation_profiles(network)
    np.testing.assert_allclose(profiles.damping, 1)
    assert len(network.residue) == len(set(network.residue.tolist()))


def test_structure_without_backbone_is_refused(data_folder):
    structure = archive(data_folder, "1orc.pdb")
    with pytest.raises(ValueError, match="no CA or P"):
        build_network(renamed(structure), ())


def renamed(structure):
    return replace(structure, atom_name=np.full(len(structure.atom_name), "CB"))


def test_correlation_of_ranks_and_values():
    found = correlate([1, 2, 3, 4, np.nan], [1, 8, 27, 64, 5])
    assert found.rank == pytest.approx(1)
    assert found.pearson == pytest.approx(
        np.corrcoef([1, 2, 3, 4], [1, 8, 27, 64])[0, 1]
    )
    assert found.n_values == 4
    assert np.isnan(correlate([1, 1, 1], [1, 2, 3]).rank)
    assert np.isnan(correlate([1, 2], [1, 2]).pearson)


def test_values_made_from_one_profile_follow_it():
    rng = np.random.default_rng(3)
    assembly, crystal = rng.gamma(2.0, size=(2, 120))
    chosen = {
        "crystal": crystal + 0.3 * rng.normal(size=120),
        "assembly": assembly + 0.3 * rng.normal(size=120),
    }
    for name, values in chosen.items():
        found = follow_profile(values, assembly=assembly, crystal=crystal, rng=rng)
        assert found.follows == name
        assert found.low < found.difference < found.high


def test_values_of_neither_profile_are_mostly_undecided():
    """The 95 % interval may miss 0 in about one of twenty; 30 trials, bound 6."""
    rng = np.random.default_rng(4)
    decided = 0
    for _ in range(30):
        values, assembly, crystal = rng.gamma(2.0, size=(3, 60))
        found = follow_profile(
            values, assembly=assembly, crystal=crystal, rng=rng, n_bootstraps=200
        )
        decided += found.follows != "undecided"
    assert decided <= 6
    few = follow_profile([1, 2, 3], assembly=[1, 2, 3], crystal=[3, 2, 1], rng=rng)
    assert few.follows == "undecided"
