import numpy as np
import pytest

from structmap.behaviour import summarise_sites, take_measurements
from structmap.errors import UnknownQuantityError
from structmap.sites import Sites
from structmap.values import Quantity, ValueTable


def quantity(name, value, error=None, *, x=()):
    value = np.array(value, float)
    value = value[:, None] if value.ndim == 1 else value
    given = np.full(value.shape, np.nan) if error is None else np.array(error, float)
    given = given[:, None] if given.ndim == 1 else given
    return Quantity(
        name=name,
        unit="s-1",
        x=x,
        x_name="field" if len(x) else "",
        x_unit="kHz" if len(x) else "",
        value=value,
        error=given,
        has_errors=bool(np.isfinite(given).any()),
    )


def table(*quantities):
    n = len(quantities[0].value)
    blank = np.full(n, "")
    return ValueTable(
        names=("values.csv",),
        sha256=("",),
        auth_asym_id=blank,
        auth_seq_id=np.arange(n),
        ins_code=blank,
        comp_id=blank,
        atom=blank,
        group=blank,
        line=np.arange(n) + 2,
        quantities=quantities,
        notes=(),
    )


def sites(n, without_residue=()):
    residue = np.arange(n)
    residue[list(without_residue)] = -1
    return Sites(
        name=np.array([f"A/{i}" for i in range(n)]),
        row=np.arange(n)[::-1],
        residue=residue,
        atom=np.full(n, ""),
        copy_site=np.arange(n),
        copy_residue=np.arange(n),
        chains=(),
        mismatches=(),
        unmatched=(),
        notes=(),
    )


def test_takes_all_quantities_with_errors_and_leaves_the_rest():
    one = quantity("R1", [1, 2, 3], [0.1, 0.1, 0.1])
    two = quantity("R2", [5, np.nan, 7], [0.5, 0.5, 0.5])
    bare = quantity("NOE", [0.8, 0.7, 0.6])
    found = take_measurements(table(one, bare, two), sites(3))
    assert found.column == ("R1", "R2")
    # Rows of the table stand in reverse order of the sites.
    np.testing.assert_array_equal(found.value, [[3, 7], [2, np.nan], [1, 5]])
    assert np.isnan(found.error[1, 1])
    assert not found.is_profile


def test_without_any_errors_takes_the_first_quantity_with_equal_weights():
    found = take_measurements(
        table(quantity("A", [1, 2]), quantity("B", [3, 4])), sites(2)
    )
    assert (found.column, found.errors_given) == (("A",), False)
    assert found.error.tolist() == [[1], [1]]


def test_errors_that_are_not_given_take_the_median_and_are_told():
    one = quantity("R1", [1, 2, 3, 4], [0.1, np.nan, 0.3, 0.2])
    found = take_measurements(table(one), sites(4))
    assert found.error[:, 0].tolist() == [0.2, 0.3, 0.2, 0.1]
    assert found.notes == (
        "1 values of R1 have no error; each takes the median error, 0.2.",
    )


def test_rows_without_a_residue_are_not_compared():
    found = take_measurements(
        table(quantity("R1", [1, 2, 3])), sites(3, without_residue=[1])
    )
    assert found.site.tolist() == [0, 2]


def test_missing_point_is_interpolated_over_x_with_doubled_error():
    profile = quantity("R", [[8, np.nan, 2, 1]], np.full((1, 4), 0.5), x=[1.0, 2, 4, 8])
    found = take_measurements(table(profile), sites(1))
    assert found.value[0, 1] == pytest.approx(8 + (2 - 8) / 3)
    assert found.error[0].tolist() == [0.5, 1.0, 0.5, 0.5]
    assert found.notes[0].startswith("1 missing points of R at 1 sites")


def test_site_that_lacks_more_than_a_third_of_its_points_is_not_measured():
    value = np.ones((2, 6))
    value[0, :3] = np.nan
    value[1, :2] = np.nan
    profile = quantity("R", value, np.ones((2, 6)), x=np.arange(6.0))
    found = take_measurements(table(profile), sites(2))
    assert found.site.tolist() == [0]
    assert "1 sites lack more than a third" in found.notes[1]


def test_points_with_a_reason_are_left_out():
    profile = quantity("R", [[1, 2, 3]], [[1, 1, 1]], x=[5.0, 10, 15])
    found = take_measurements(
        table(profile), sites(1), point_reason=("", "too close to resonance", "")
    )
    assert found.column == ("R at 5 kHz", "R at 15 kHz")
    assert found.point_kept.tolist() == [True, False, True]


def test_shape_is_what_remains_without_the_inverse_variance_mean():
    error = np.array([[1.0, 2.0, 2.0]])
    profile = quantity("R", [[9, 3, 3]], error, x=[1.0, 2, 3])
    found = take_measurements(table(profile), sites(1), model_name="cpmg")
    mean = (9 / 1 + 3 / 4 + 3 / 4) / 1.5
    assert found.value[0] == pytest.approx([9 - mean, 3 - mean, 3 - mean])
    assert (found.part, found.n_baselines) == ("shape", 1)


def test_level_is_the_inverse_variance_mean_alone():
    profile = quantity("R", [[9, 3, 3]], [[1, 2, 2]], x=[1.0, 2, 3])
    found = take_measurements(table(profile), sites(1), profile_part="level")
    assert found.value[0] == pytest.approx([10.5 / 1.5])
    assert found.error[0] == pytest.approx([1 / np.sqrt(1.5)])


def test_one_point_profile_is_read_as_it_is():
    single = quantity("R", [1.0, 2.0], [0.1, 0.1], x=[5.0])
    found = take_measurements(table(single), sites(2), profile_part="shape")
    assert (found.part, found.n_baselines, found.value.shape) == ("whole", 0, (2, 1))


def test_nothing_measured_leaves_no_site():
    found = take_measurements(table(quantity("R", [np.nan, np.nan])), sites(2))
    assert len(found.site) == 0


def test_unknown_quantity_is_named():
    with pytest.raises(
        UnknownQuantityError, match=r"^values\.csv: there is no quantity R9;"
    ):
        take_measurements(table(quantity("R1", [1.0])), sites(1), quantity=("R9",))


def test_reasons_must_fit_the_points():
    profile = quantity("R", [[1, 2, 3]], x=[1.0, 2, 3])
    with pytest.raises(ValueError, match=r"^point_reason has 2 entries; need 3"):
        take_measurements(table(profile), sites(1), point_reason=("", ""))


def test_summary_of_a_shape_is_the_span_with_large_ones_positive():
    rising = [[1, 1.5, 2, 2.5, 3, 3.5, 4, 9], [2] * 8]
    profile = quantity("R", rising, np.full((2, 8), 0.5), x=np.arange(8.0))
    found = take_measurements(table(profile), sites(2), profile_part="shape")
    summary = summarise_sites(found, np.zeros((2, 8)), error_scale=2.0)
    # Rows stand in reverse: the flat one first. (4 + 9)/2 - (1 + 1.5)/2 = 5.25.
    assert summary.value == pytest.approx([0, 5.25])
    assert summary.error == pytest.approx([2 * 0.5] * 2)
    assert summary.name == "span of R"


def test_summary_of_whole_profiles_is_the_mean_less_the_baseline():
    profile = quantity("R", [[4, 8]], [[1, 2]], x=[1.0, 2])
    found = take_measurements(table(profile), sites(1))
    summary = summarise_sites(found, np.full((1, 2), 3.0), error_scale=1.0)
    assert summary.value == pytest.approx([(1 / 1 + 5 / 4) / 1.25])
    assert summary.error == pytest.approx([1 / np.sqrt(1.25)])
