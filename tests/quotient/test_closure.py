"""Which group a set of symmetry elements generates."""

import gemmi
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from structmap.quotient import close_group, close_transforms
from structmap.quotient.closure import hermite_basis, shorten_basis

CUBE = np.diag([10.0, 10.0, 10.0])


def generators(*triplets):
    operators = [gemmi.Op(triplet) for triplet in triplets]
    rotations = np.array([operator.rot for operator in operators]) // 24
    return rotations, np.array([operator.tran for operator in operators])


def closed(*triplets):
    rotations, translations = generators(*triplets)
    return close_group(rotations, translations, orthogonalisation=CUBE)


@pytest.mark.parametrize(
    ("triplets", "closes", "order", "periods"),
    [
        ((), "finite", 1, []),
        (("-x,y,-z",), "ring", 2, []),
        (("-y,x-y,z",), "ring", 3, []),
        (("x,y,z+1",), "rod", 1, [[0, 0, 1]]),
        (("-x,y+1/2,-z",), "rod", 2, [[0, 1, 0]]),  # two half steps of a screw axis
        (("-x,-y,z+1/2", "x,y,z+3"), "rod", 2, [[0, 0, 1]]),
        (("-x,y,-z", "-x+1,y,-z"), "rod", 2, [[1, 0, 0]]),  # two parallel twofolds
        (("x+1,y,z", "x,y-1,z"), "layer", 1, [[0, 1, 0], [1, 0, 0]]),
        # Twofold screws along all three edges that meet: their product (-x,-y,z+1/2)
        # (x+1/2,-y,-z) = (-x-1/2,y,-z+1/2) beside (-x,y+1/2,-z) centres the body.
        (
            ("z,x,y", "-x,-y,z+1/2"),
            *("net", 12, [[1, 0, 0], [0, 1, 0], [0.5, 0.5, 0.5]]),
        ),
    ],
)
def test_groups_that_can_be_worked_out_by_hand(triplets, closes, order, periods):
    found = closed(*triplets)
    assert (found.closes, found.order) == (closes, order)
    expected = np.rint(24 * np.array(periods).reshape(-1, 3)).astype(int)
    np.testing.assert_array_equal(
        hermite_basis(np.rint(24 * found.periods).astype(int)), hermite_basis(expected)
    )


@pytest.mark.parametrize("number", [1, 4, 19, 92, 96, 154, 169, 178, 198, 212])
def test_all_operators_of_a_space_group_with_one_cell_give_the_group_back(number):
    """Order of the point group: International Tables, as gemmi lists them."""
    group = gemmi.find_spacegroup_by_number(number)
    triplets = [operator.triplet() for operator in group.operations()]
    found = closed(*triplets, "x+1,y,z", "x,y+1,z", "x,y,z+1")
    assert found.closes == "net"
    assert found.order == len(group.operations().sym_ops)
    cell = hermite_basis(np.rint(24 * found.periods).astype(int))
    np.testing.assert_array_equal(cell, 24 * np.eye(3))


def test_centring_shortens_the_periods():
    found = closed("x+1,y,z", "x,y+1,z", "x,y,z+1", "x+1/2,y+1/2,z+1/2")
    assert abs(np.linalg.det(found.periods)) == pytest.approx(0.5)


vectors = st.lists(st.tuples(*[st.integers(-30, 30)] * 3), max_size=6)


@given(vectors)
def test_hermite_basis_spans_the_same_lattice(rows):
    rows = np.array(rows, dtype=int).reshape(-1, 3)
    basis = hermite_basis(rows)
    assert len(basis) == (np.linalg.matrix_rank(rows) if len(rows) else 0)
    # Adding the old vectors to the new basis, or new ones to the old, changes nothing.
    both = np.concatenate([rows, basis])
    np.testing.assert_array_equal(hermite_basis(both), basis)
    np.testing.assert_array_equal(hermite_basis(both[::-1]), basis)
    if len(basis):
        multiples = np.linalg.lstsq(basis.T.astype(float), rows.T.astype(float))[0]
        np.testing.assert_allclose(multiples, np.rint(multiples), atol=1e-6)


@given(vectors)
def test_short_basis_spans_the_same_lattice_and_is_no_longer(rows):
    rows = np.array(rows, dtype=int).reshape(-1, 3)
    basis = hermite_basis(rows)
    short = shorten_basis(basis, np.diag([5.0, 10.0, 30.0]))
    np.testing.assert_array_equal(hermite_basis(short), basis)


def test_long_way_round_becomes_the_short_period():
    short = shorten_basis(np.array([[24, 0, 240], [0, 0, 24]]), CUBE)
    np.testing.assert_array_equal(np.sort(short, axis=0), [[0, 0, 0], [24, 0, 24]])


# --- groups that no crystal makes -----------------------------------------------------


def turn(axis, degrees, shift=(0, 0, 0)):
    axis = np.array(axis) / np.linalg.norm(axis)
    cross = np.cross(np.eye(3), axis)
    angle = np.radians(degrees)
    out = np.eye(4)
    out[:3, :3] += np.sin(angle) * cross + (1 - np.cos(angle)) * cross @ cross
    out[:3, 3] = shift
    return out


CENTRE = np.array([30.0, 5.0, 3.0])
GOLDEN = (1 + 5**0.5) / 2


@pytest.mark.parametrize(
    ("transforms", "closes", "order", "rank"),
    [
        ([], "finite", 1, 0),
        ([turn([0, 0, 1], 60)], "ring", 6, 0),
        ([turn([1, 1, 1], 120), turn([0, 0, 1], 180)], "ring", 12, 0),
        # The icosahedral group has 60 rotations.
        ([turn([0, 1, GOLDEN], 72), turn([1, 1, 1], 120)], "ring", 60, 0),
        # Actin-like helix, -166.7 degrees and 27.5 Å a subunit.
        ([turn([0, 0, 1], -166.7, (0, 0, 27.5))], "rod", 0, 1),
        ([turn([0, 0, 1], 180), turn([0, 0, 1], 180, (90, 0, 0))], "rod", 0, 1),
        ([turn([0, 0, 1], 0, (90, 0, 0)), turn([0, 0, 1], 90)], "layer", 0, 2),
    ],
)
def test_assemblies_without_a_crystal(transforms, closes, order, rank):
    given_transforms = np.array(transforms).reshape(-1, 4, 4)
    rounded = np.round(given_transforms, 5)  # as files write them
    found = close_transforms(rounded, centre=CENTRE)
    assert (found.closes, found.order, found.rank) == (closes, order, rank)


def test_frame_of_the_file_does_not_matter():
    frame = turn([1, 2, 3], 77, (100, -50, 20))
    inside = [turn([0, 1, GOLDEN], 72), turn([1, 1, 1], 120)]
    moved = np.array([frame @ one @ np.linalg.inv(frame) for one in inside])
    found = close_transforms(moved, centre=frame[:3, :3] @ CENTRE + frame[:3, 3])
    assert (found.closes, found.order) == ("ring", 60)
