"""Superposing two forms on a rigid core."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from structmap.forms import find_rigid_bodies, superpose
from tests.quotient.cases import archive


def moved(points, rotation, shift):
    return points @ rotation.T + shift


def random_rotation(seed):
    turn = np.random.default_rng(seed).normal(scale=2, size=3)
    return Rotation.from_rotvec(turn).as_matrix()


def chain(rng, n):
    steps = rng.normal(size=(n, 3))
    steps *= 3.8 / np.linalg.norm(steps, axis=1, keepdims=True)
    return np.cumsum(steps, axis=0)


@given(st.integers(0, 10_000), st.integers(3, 40))
def test_a_moved_body_is_laid_back(seed, n_points):
    rng = np.random.default_rng(seed)
    points = rng.normal(scale=10, size=(n_points, 3))
    rotation, shift = random_rotation(seed), rng.normal(scale=50, size=3)
    transform = superpose(points, moved(points, rotation, shift))
    np.testing.assert_allclose(transform[:3, :3], rotation.T, atol=1e-7)
    back = moved(moved(points, rotation, shift), transform[:3, :3], transform[:3, 3])
    np.testing.assert_allclose(back, points, atol=1e-7)


def test_agrees_with_another_library():
    rng = np.random.default_rng(0)
    first, second = rng.normal(size=(2, 30, 3))
    expected, rssd = Rotation.align_vectors(
        first - first.mean(axis=0), second - second.mean(axis=0)
    )
    transform = superpose(first, second)
    np.testing.assert_allclose(transform[:3, :3], expected.as_matrix(), atol=1e-9)
    left = first - moved(second, transform[:3, :3], transform[:3, 3])
    assert np.sqrt((left**2).sum()) == pytest.approx(rssd)


def test_mirror_image_is_never_laid_on():
    rng = np.random.default_rng(1)
    points = rng.normal(size=(20, 3))
    transform = superpose(points, points * [-1, 1, 1])
    assert np.linalg.det(transform[:3, :3]) == pytest.approx(1)


def two_domains(seed=3):
    """120 residues of which 81 to 115 turn by 50 degrees about a hinge; some noise."""
    rng = np.random.default_rng(seed)
    first = chain(rng, 120)
    second = first + rng.normal(scale=0.3, size=first.shape)
    hinge = Rotation.from_rotvec([0, 0, np.radians(50)]).as_matrix()
    domain = slice(81, 116)
    second[domain] = moved(second[domain] - second[81], hinge, second[81] + [0, 12, 0])
    return first, moved(second, random_rotation(seed), np.array([40.0, 5.0, -9.0]))


def test_planted_domains_are_found_apart():
    core, lid = find_rigid_bodies(*two_domains())[:2]
    assert set(range(81)) <= set(core.members.tolist())
    assert len(set(core.members.tolist()) & set(range(81, 116))) <= 3
    assert set(lid.members.tolist()) >= set(range(84, 113))
    assert core.rms_angstrom < 0.8


def test_superposing_on_everything_is_worse_on_the_core():
    first, second = two_domains()
    whole = superpose(first, second)
    core = find_rigid_bodies(first, second)[0]
    still = core.members
    gap = first[still] - moved(second[still], whole[:3, :3], whole[:3, 3])
    assert np.sqrt((gap**2).sum(axis=1).mean()) > 2 * core.rms_angstrom


def test_order_of_frames_does_not_matter():
    first, second = two_domains()
    turn = random_rotation(9)
    one = find_rigid_bodies(first, second)
    other = find_rigid_bodies(moved(first, turn, np.ones(3)), second)
    for left, right in zip(one, other, strict=True):
        np.testing.assert_array_equal(left.members, right.members)


def test_too_few_residues_have_no_rigid_body():
    points = np.zeros((10, 3))
    assert find_rigid_bodies(points, points) == ()
    with pytest.raises(ValueError, match="shapes"):
        find_rigid_bodies(points, points[:4])


def test_two_copies_in_one_crystal_are_one_body(data_folder):
    """1a28 chains A and B, two molecules of one crystal, differ little."""
    structure = archive(data_folder, "1a28.pdb.gz")
    is_ca = structure.atom_name == "CA"
    residue = structure.residue_of_atom
    own = {}
    for name in "AB":
        chosen = is_ca & (structure.auth_asym_id[residue] == name)
        chosen &= structure.copy_of_residue[residue] >= 0
        numbers = structure.auth_seq_id[residue[chosen]]
        own[name] = dict(
            zip(numbers.tolist(), structure.position[chosen], strict=False)
        )
    shared = sorted(own["A"].keys() & own["B"].keys())
    first, second = (np.array([own[name][n] for n in shared]) for name in "AB")
    core = find_rigid_bodies(first, second)[0]
    assert len(core.members) > 0.9 * len(shared)
    assert core.rms_angstrom < 1.0
