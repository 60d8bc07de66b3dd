"""Whether the sample's crystal is that of the file."""

import gemmi
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from structmap.cell import compare_cells, parse_cell
from structmap.errors import SettingError
from structmap.structure import Crystal


def crystal_of(cell, space_group):
    group = gemmi.find_spacegroup_by_name(space_group, alpha=cell[3], gamma=cell[5])
    unit = gemmi.UnitCell(*cell)
    operators = list(group.operations())
    return Crystal(
        cell=cell,
        space_group=group.xhm(),
        orthogonalisation=np.array(unit.orth.mat.tolist()),
        orthogonalisation_shift=np.zeros(3),
        fractionalisation=np.array(unit.frac.mat.tolist()),
        fractionalisation_shift=np.zeros(3),
        rotations=np.array([op.rot for op in operators]) // 24,
        translations=np.array([op.tran for op in operators]),
        triplets=tuple(op.triplet() for op in operators),
    )


def verdict(own, own_group, cell, group):
    return compare_cells(crystal_of(own, own_group), cell=cell, space_group=group)


ORC = (34.77, 39.17, 48.31, 90.0, 90.0, 90.0)


@pytest.mark.parametrize(
    ("own", "own_group", "cell", "group", "expected"),
    [
        (ORC, "P 21 21 21", ORC, "P 21 21 21", "same lattice"),
        (ORC, "P 21 21 21", (35.2, 39.6, 48.9, 90, 90, 90), "P212121", "same lattice"),
        # Axes in another order: standard symbol stays, the cell does not.
        (ORC, "P 21 21 21", (39.17, 48.31, 34.77, 90, 90, 90), "", "related setting"),
        (ORC, "P 21 21 21", (34.77, 39.17, 52.0, 90, 90, 90), "", "different crystal"),
        (ORC, "P 21 21 21", ORC, "P 21 21 2", "different crystal"),
        # Unique axis b and c of one monoclinic crystal.
        (
            *((40.8, 18.5, 22.4, 90.0, 100.5, 90.0), "P 1 21 1"),
            *((22.4, 40.8, 18.5, 90.0, 90.0, 100.5), "P 1 1 21", "related setting"),
        ),
        # P 21 2 21 and P 21 21 2 (International Tables 18) with b and c exchanged.
        (
            *((109.79, 109.95, 201.44, 90.0, 90.0, 90.0), "P 21 2 21"),
            *((201.44, 109.79, 109.95, 90.0, 90.0, 90.0), "P 21 21 2"),
            "related setting",
        ),
        # Hens' lysozyme: tetragonal against triclinic (from memory).
        (
            *((79.1, 79.1, 37.9, 90.0, 90.0, 90.0), "P 43 21 2"),
            *((27.3, 32.0, 34.3, 88.5, 108.6, 111.9), "P 1", "different crystal"),
        ),
        # An axis doubled is another lattice although the contents may look alike.
        (
            *((50.0, 60.0, 70.0, 90.0, 90.0, 90.0), "P 21 21 21"),
            *((50.0, 60.0, 140.0, 90.0, 90.0, 90.0), "P 21 21 21", "different crystal"),
        ),
    ],
)
def test_verdicts(own, own_group, cell, group, expected):
    found = verdict(own, own_group, cell, group)
    assert found.verdict == expected
    assert found.sentence.endswith(").")


def test_hexagonal_and_rhombohedral_axes_are_one_lattice():
    """a_r = sqrt(3 a^2 + c^2) / 3, sin(alpha / 2) = 1.5 / sqrt(3 + (c / a)^2).

    International Tables, cited from memory.
    """
    a, c = 122.06, 42.55
    a_r = np.sqrt(3 * a**2 + c**2) / 3
    alpha = 2 * np.degrees(np.arcsin(1.5 / np.sqrt(3 + c**2 / a**2)))
    hexagonal = (a, a, c, 90.0, 90.0, 120.0)
    found = verdict(hexagonal, "H 3", (a_r,) * 3 + (alpha,) * 3, "R 3")
    assert found.verdict == "related setting"
    assert found.length_difference < 1e-6
    assert found.volume_ratio == pytest.approx(1)


def test_two_cells_of_centred_monoclinic():
    """C- and I-centred cells of one lattice, a' = a + c and c' = -c.

    (a + b) / 2 is (a' + b + c') / 2: the point that centres the face centres the body.
    """
    a, b, c, beta = 50.35, 24.78, 34.75, 101.7
    axes = np.array(gemmi.UnitCell(a, b, c, 90, beta, 90).orth.mat.tolist())
    new = np.column_stack([axes[:, 0] + axes[:, 2], axes[:, 1], -axes[:, 2]])
    length = np.linalg.norm(new, axis=0)
    angle = np.degrees(np.arccos(new[:, 0] @ new[:, 2] / length[0] / length[2]))
    cell = (*length, 90.0, angle, 90.0)
    body = verdict((a, b, c, 90.0, beta, 90.0), "C 1 2 1", cell, "I 1 2 1")
    primitive = verdict((a, b, c, 90.0, beta, 90.0), "C 1 2 1", cell, "P 1 2 1")
    assert body.verdict == "related setting"
    assert body.length_difference < 1e-6
    assert body.volume_ratio == pytest.approx(1)
    assert primitive.verdict == "different crystal"
    assert primitive.volume_ratio == pytest.approx(2)
    assert "2 times" in primitive.sentence


lengths = st.floats(20, 150)
angles = st.floats(75, 105)
changes = st.lists(
    st.tuples(st.integers(0, 2), st.integers(0, 2), st.integers(-2, 2)), max_size=4
)


@given(st.tuples(lengths, lengths, lengths, angles, angles, angles), changes)
def test_any_other_basis_of_a_triclinic_lattice_is_a_related_setting(cell, steps):
    axes = np.array(gemmi.UnitCell(*cell).orth.mat.tolist())
    for one, other, times in steps:
        if one != other:
            axes[:, one] += times * axes[:, other]
    length = np.linalg.norm(axes, axis=0)
    pairs = [(1, 2), (0, 2), (0, 1)]
    cosine = [axes[:, i] @ axes[:, j] / length[i] / length[j] for i, j in pairs]
    written = (*length, *np.degrees(np.arccos(cosine)))
    found = verdict(cell, "P 1", written, "P 1")
    assert found.verdict in ("same lattice", "related setting")
    assert found.length_difference < 1e-5


def test_small_change_that_makes_the_reduced_cell_jump_is_no_other_crystal():
    """Angles of 89.9 and 90.1 degrees reduce to cells of different type."""
    found = verdict(
        (40.0, 41.0, 42.0, 89.9, 89.9, 89.9),
        "P 1",
        (40.0, 41.0, 42.0, 90.1, 90, 90),
        "",
    )
    assert found.verdict == "same lattice"
    assert found.angle_difference_degrees < 0.3


def test_space_group_alone():
    own = crystal_of(ORC, "P 21 21 21")
    assert compare_cells(own, space_group="P 21 21 21").verdict == "same lattice"
    assert compare_cells(own, space_group="C 2 2 21").verdict == "different crystal"
    with pytest.raises(ValueError, match="cell or the space group"):
        compare_cells(own)


@pytest.mark.parametrize("text", ["", "a b c", "1 2", "10 10 10 90 90 200", "0 1 1"])
def test_cells_that_cannot_be(text):
    with pytest.raises(SettingError, match="sample_cell"):
        parse_cell(text)


def test_cells_are_read():
    assert parse_cell("34.8, 39.2,48.3") == (34.8, 39.2, 48.3, 90, 90, 90)
    with pytest.raises(SettingError, match=r"sample_space_group is 'P 99'"):
        compare_cells(crystal_of(ORC, "P 1"), cell=ORC, space_group="P 99")
