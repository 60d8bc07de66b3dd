"""Shift changes, thresholds and populations against worked figures."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from structmap.errors import UnusableProfileError
from structmap.shifts import (
    combine_changes,
    compare_shifts,
    find_doubled_peaks,
    find_fast_population,
    find_populations,
    find_threshold,
    pair_with_states,
    perturbation_rows,
    perturbation_table,
)
from structmap.values import Quantity, ValueTable, read_values

AMIDE = (1.0, 0.14)


# --- combined change and threshold ----------------------------------------------------


@pytest.mark.parametrize(
    ("weight", "expected"), [(0.14, 0.04617359), (0.20, 0.05522681)]
)
def test_combined_change(weight, expected):
    found = combine_changes([0.05, 0.30], [1.0, weight])
    assert found == pytest.approx(expected, rel=1e-6)


def test_threshold_warns_when_no_large_change_is_dropped():
    change = [0.01, 0.012, 0.008, 0.015, 0.02, 0.009, 0.011, 0.013, 0.3, 0.25]
    found = find_threshold(change)
    assert found.sigma == pytest.approx(0.1240177, rel=1e-6)
    assert found.kept.all()
    assert found.median_sigma == pytest.approx(0.01501403, rel=1e-6)
    assert found.warns
    assert found.used == found.median_sigma


def test_threshold_drops_a_few_large_changes():
    change = np.concatenate([np.linspace(0.004, 0.03, 20), [0.12, 0.2, 0.35]])
    found = find_threshold(change)
    assert found.sigma == pytest.approx(0.01874202, rel=1e-6)
    assert found.kept.sum() == 20
    assert found.median_sigma == pytest.approx(0.02288454, rel=1e-6)
    assert not found.warns
    assert (found.significant, found.strong) == pytest.approx(
        (2 * found.sigma, 3 * found.sigma)
    )


def test_two_gaussian_components_exceed_the_threshold_as_often_as_stated():
    # exp(-4) = 1.8 % above two sigma, for the length of a two-dimensional normal.
    rng = np.random.default_rng(4)
    parts = rng.standard_normal((20_000, 2)) / np.array([1.0, 0.14])
    change = combine_changes(parts, AMIDE)
    found = find_threshold(change)
    assert np.mean(change > found.significant) == pytest.approx(np.exp(-4), abs=0.004)
    assert found.median_sigma == pytest.approx(found.sigma, rel=0.03)


def test_many_shifted_sites_are_still_found():
    # 30 of 100 sites shifted: the usual spread finds a third of them, the
    # median-based one nearly all.
    rng = np.random.default_rng(6)
    change = combine_changes(rng.standard_normal((100, 2)), (1.0, 1.0))
    change[:30] = rng.uniform(5, 12, 30)
    found = find_threshold(change)
    assert found.warns
    assert (change[:30] > found.significant).all()


def test_no_change_at_all_has_no_threshold():
    with pytest.raises(ValueError, match=r"^changes holds no known change"):
        find_threshold([np.nan])


# --- populations ----------------------------------------------------------------------


@pytest.mark.parametrize(
    ("error", "ratio", "larger"), [(0.2, 0.81, 0.6921095), (0.5, 0.7957476, None)]
)
def test_folded_likelihood(error, ratio, larger):
    found = find_populations([0.9, -0.7, 1.1, -0.5, 0.85], error)
    # The figures have seven digits of a flat optimum of the likelihood.
    assert found.log_ratio == pytest.approx(ratio, rel=2e-5)
    if larger:
        assert found.larger == pytest.approx(larger, rel=1e-5)


@pytest.mark.parametrize(("error", "expected"), [(0.4, 0.155), (0.2, 0.021)])
def test_chance_of_the_wrong_orientation(error, expected):
    rng = np.random.default_rng(9)
    drawn = np.log(0.6 / 0.4) + error * rng.standard_normal(20_000)
    found = find_populations(drawn, error)
    assert found.wrong_orientation[0] == pytest.approx(expected, abs=0.01)


def test_equal_populations_are_hardly_biased():
    rng = np.random.default_rng(8)
    found = [
        find_populations(0.3 * rng.standard_normal(12), 0.3).larger for _ in range(200)
    ]
    # Averaging the larger peaks would give 0.56.
    assert np.mean(found) == pytest.approx(0.52, abs=0.015)


def test_different_populations_are_noticed():
    assert find_populations([0.1, 2.0, 0.1, 2.0], 0.1).p_shared < 1e-6
    assert find_populations([1.0, 1.1, 0.9, 1.05], 0.1).p_shared > 0.05


def test_population_in_fast_exchange():
    found = find_fast_population(
        (8.19, 120.8), (8.10, 120.0), (8.40, 123.0), weights=AMIDE
    )
    assert found.population_b == pytest.approx(0.2779279, rel=1e-6)
    assert found.off_line == pytest.approx(0.005753965, rel=1e-6)


@given(share=st.floats(0, 1))
def test_a_point_on_the_line_gives_its_share(share):
    start, end = np.array([8.1, 120.0]), np.array([8.4, 123.0])
    seen = start + share * (end - start)
    found = find_fast_population(seen, start, end, weights=AMIDE)
    assert found.population_b == pytest.approx(share, abs=1e-9)
    assert found.off_line == pytest.approx(0.0, abs=1e-9)


def test_peaks_are_paired_with_the_nearer_states():
    states = [(8.0, 120.0), (8.5, 124.0)]
    crossed = [(8.49, 124.1), (8.02, 120.1)]
    found = pair_with_states(crossed, states, weights=AMIDE, error=0.01)
    assert (found.swapped, found.ambiguous) == (True, False)
    between = [(8.25, 122.0), (8.251, 122.01)]
    assert pair_with_states(between, states, weights=AMIDE, error=0.05).ambiguous


# --- lists ----------------------------------------------------------------------------


def shift_list(rows, *, name="free.csv", error=np.nan, extra=()):
    """Make a list of residues 1, 2, …; each row holds H, N and further columns."""
    table = np.array(rows, dtype=float)
    names = ("H", "N", *extra)
    quantities = tuple(
        Quantity(
            name=column,
            unit="ppm",
            x=np.empty(0),
            x_name="",
            x_unit="",
            value=table[:, [index]],
            error=np.full((len(table), 1), error),
            has_errors=bool(np.isfinite(error)),
        )
        for index, column in enumerate(names)
    )
    size = len(table)
    return ValueTable(
        names=(name,),
        sha256=("",),
        auth_asym_id=["A"] * size,
        auth_seq_id=np.arange(size) + 1,
        ins_code=[""] * size,
        comp_id=["GLY" if number == 1 else "ALA" for number in range(size)],
        atom=[""] * size,
        group=[""] * size,
        line=np.arange(size) + 2,
        quantities=quantities,
        notes=(),
    )


FREE = [(8.0, 120.0), (8.2, 110.0), (8.4, 121.0), (8.6, np.nan), (7.9, 119.0)]
BOUND = [(8.05, 120.3), (8.25, 110.3), (np.nan, np.nan), (8.5, 118.0), (7.9, 119.0)]


def test_two_lists_are_paired_and_glycine_has_its_own_weight():
    found = compare_shifts([shift_list(FREE), shift_list(BOUND)])
    change = found.change[:, 0]
    np.testing.assert_allclose(change[:2], [0.04617359, 0.05522681], rtol=1e-6)
    assert change[4] == pytest.approx(0.0)
    assert found.lost[:, 0].tolist() == [False, False, True, False, False]
    assert found.appeared[:, 0].tolist() == [False, False, False, True, False]


def test_errors_propagate_into_the_change():
    rng = np.random.default_rng(3)
    drawn = combine_changes(
        np.array([0.05, 0.30]) + np.sqrt(2) * 0.004 * rng.standard_normal((40_000, 2)),
        AMIDE,
    )
    free, bound = (shift_list(rows, error=0.004) for rows in (FREE, BOUND))
    found = compare_shifts([free, bound])
    assert found.error[0, 0] == pytest.approx(drawn.std(), rel=0.03)


def test_a_series_becomes_a_profile_that_starts_at_zero():
    half = [(8.025, 120.15), (8.22, 110.1), (8.4, 121.0), (8.5, 118.0), (7.9, 119.0)]
    found = compare_shifts([shift_list(rows) for rows in (FREE, half, BOUND)])
    table = perturbation_table(found, x=[0, 5e-5, 1e-4], x_name="ligand", x_unit="M")
    quantity = table.quantities[0]
    np.testing.assert_allclose(
        quantity.value[0], [0.0, 0.04617359 / 2, 0.04617359], rtol=1e-6
    )
    assert np.isnan(quantity.value[2, 2])


def test_without_x_the_last_change_stands_for_the_site():
    table = perturbation_table(compare_shifts([shift_list(FREE), shift_list(BOUND)]))
    assert table.quantities[0].value.shape == (5, 1)
    assert table.auth_seq_id.tolist() == [1, 2, 3, 4, 5]


def test_rows_name_lost_and_new_peaks():
    rows = perturbation_rows(compare_shifts([shift_list(FREE), shift_list(BOUND)]))
    assert [row["note"] for row in rows][2:4] == ["lost", "new"]
    assert rows[0]["shift_change [ppm]"] == "0.0461736"
    assert rows[0]["N_change"] == "0.3"


def test_doubled_peaks_give_populations():
    extra = ("H_B", "N_B", "height", "height_B")
    rows = [
        (8.0, 120.0, 8.1, 121.0, 7.0, 3.0),
        (8.2, 110.0, 8.3, 111.0, 3.0, 7.0),
        (8.4, 121.0, np.nan, np.nan, 10.0, np.nan),
    ]
    doubled = shift_list(rows, extra=extra)
    found = find_doubled_peaks(doubled)
    assert [site[1] for site in found.site] == [1, 2]
    np.testing.assert_allclose(found.population, 0.7, rtol=1e-9)
    assert found.common.larger == pytest.approx(0.7, abs=0.01)
    plain = shift_list([row[:2] for row in rows])
    compared = compare_shifts([plain, doubled])
    assert compared.doubled[:, 0].tolist() == [True, True, False]
    listed = perturbation_rows(compared, doubled=found)
    assert [row["population"] for row in listed] == ["0.7", "0.7", ""]
    assert listed[0]["note"].startswith("doubled")
    # The stronger peak of the second residue is the one listed second.
    assert compared.parts[1, 0, 0] == pytest.approx(0.1)


def test_lists_that_share_no_nucleus_are_refused():
    other = shift_list([(1.0, 2.0)], name="carbon.csv")
    wrong = ValueTable(
        **{
            name: getattr(other, name)
            for name in other.__dataclass_fields__
            if name != "quantities"
        },
        quantities=(),
    )
    message = r"^carbon.csv: there are no shifts of H or N that all lists have; name"
    with pytest.raises(UnusableProfileError, match=message):
        compare_shifts([shift_list(FREE), wrong])


def test_one_list_is_too_few():
    with pytest.raises(ValueError, match=r"^lists holds 1; two or more are needed"):
        compare_shifts([shift_list(FREE)])


def test_the_same_shifts_from_star_and_nef_do_not_change(data_folder):
    """BMRB 16570 and the NEF file of the same entry hold the same shifts."""
    star = read_values(data_folder / "public" / "nmrstar" / "bmr16570.str")
    nef = read_values(data_folder / "public" / "nef" / "2kpu.nef.gz")
    bare = ValueTable(
        **{
            name: getattr(nef, name)
            for name in nef.__dataclass_fields__
            if name != "auth_asym_id"
        },
        auth_asym_id=[""] * len(nef.line),
    )
    found = compare_shifts([star, bare])
    known = np.isfinite(found.change[:, 0])
    assert known.sum() > 70
    assert np.nanmax(found.change) < 1e-6
