"""The test of one process on invented profiles with planted correlation times.

Expected figures come from an independent program on the same numbers; chances depend on
the draws to about 0.03, intervals there were read off a grid of 6 % steps.
"""

from dataclasses import replace

import numpy as np
import pytest

from structmap.one_process import Reference, TestOptions, judge_group, plain_words
from structmap.one_process.profiles import Profiles, find_flat_sites, make_profiles
from tests.one_process.demo import FIELDS, MODEL, join, make_blocks

BLOCKS = make_blocks()


def judge(profiles, *, reference=None, **choices):
    return judge_group(
        profiles,
        MODEL,
        rng=np.random.default_rng(7),
        options=TestOptions(n_border=999, **choices),
        reference=reference,
    )


def others(name):
    return Reference(profiles=join(*(b for n, b in BLOCKS.items() if n != name)))


def test_the_profiles_are_the_agreed_ones():
    first = BLOCKS["P"].value[0, :3]
    np.testing.assert_allclose(first, [8.239336, 7.175536, 8.053904], atol=5e-7)
    first = BLOCKS["Q"].value[0, :3]
    np.testing.assert_allclose(first, [5.761344, 5.736393, 6.223758], atol=5e-7)


@pytest.mark.parametrize(
    ("name", "tau", "interval", "statistic", "ratio", "reference"),
    [
        ("P", 7.122e-6, (6.68e-6, 7.50e-6), 1.584, 1.34, 0.006),
        ("Q", 1.846e-5, (1.73e-5, 2.00e-5), 0.9126, 1.54, 0.001),
    ],
)
def test_planted_units_share_one_time(name, tau, interval, statistic, ratio, reference):
    found = judge(BLOCKS[name], reference=others(name))
    assert found.verdict == "shared"
    assert found.value == pytest.approx(tau, rel=5e-4)
    assert (found.low, found.high) == pytest.approx(interval, rel=0.03)
    assert found.statistic == pytest.approx(statistic, rel=5e-4)
    assert found.detectable_ratio == pytest.approx(ratio, rel=0.05)
    assert found.reference_p == pytest.approx(reference, abs=0.006)


@pytest.mark.parametrize(
    ("name", "chances"), [("P", (0.12, 0.17)), ("Q", (0.48, 0.53))]
)
def test_chances_of_the_planted_units(name, chances):
    found = judge(BLOCKS[name])
    assert (found.p_parametric, found.p_wild) == pytest.approx(chances, abs=0.05)


@pytest.mark.parametrize(("name", "tau"), [("P", 7e-6), ("Q", 1.8e-5)])
def test_planted_times_lie_inside_their_intervals(name, tau):
    found = judge(BLOCKS[name])
    assert found.low < tau < found.high


def test_the_hinge_moves_outside_the_window():
    found = judge(BLOCKS["R"])
    assert (found.verdict, len(found.flat)) == ("undetermined", 6)
    assert np.isnan([found.low, found.high]).all()
    assert found.reason.startswith("no information: 6 of 6 profiles are flat")


def test_rigid_sites_carry_no_information():
    assert find_flat_sites(BLOCKS["B"]).all()


def test_the_surface_patch_is_distinct():
    found = judge(BLOCKS["X"])
    assert found.verdict == "distinct"
    assert found.statistic == pytest.approx(12.14, abs=0.005)
    assert (found.p_parametric, found.p_wild) == (0.001, 0.001)


def test_one_odd_site_is_named():
    found = judge(join(BLOCKS["Q"], BLOCKS["P"].take([0])))
    assert found.statistic == pytest.approx(7.614, abs=5e-4)
    assert (found.verdict, found.apart) == ("shared by a subset", ("P1",))
    assert found.kept_fit.profiles.name == BLOCKS["Q"].name
    assert found.kept_fit.shared == found.value
    assert found.value == pytest.approx(1.846e-5, rel=5e-4)
    assert "all but P1" in plain_words(found)[0]


def test_two_units_together_are_distinct():
    found = judge(join(BLOCKS["P"], BLOCKS["Q"]))
    assert found.statistic == pytest.approx(21.35, abs=0.01)
    assert found.verdict == "distinct"


def test_missing_points_are_simply_absent():
    value = BLOCKS["P"].value.copy()
    value[[0, 3, 7], 4] = np.nan
    found = judge(replace(BLOCKS["P"], value=value))
    assert found.verdict == "shared"
    assert found.fit.freedom_free == 120 - 3 - 30


def test_a_wild_point_shows_up():
    value = BLOCKS["P"].value.copy()
    value[2, 9] += 8.0
    found = judge(replace(BLOCKS["P"], value=value))
    assert found.worst[0].startswith("P3, x = 41000 Hz: ")
    assert "too small" in found.error_note


def test_points_of_caution_may_not_decide():
    value = BLOCKS["Q"].value.copy()
    value[::2, :2] += 4.0  # half of the sites deviate in two doubtful points
    spoiled = replace(BLOCKS["Q"], value=value)
    found = judge_group(
        spoiled,
        MODEL,
        rng=np.random.default_rng(7),
        options=TestOptions(n_border=999),
        caution=FIELDS < 10e3,
    )
    assert found.verdict == "undetermined"
    assert "points to be taken with caution decide" in found.reason


def test_flat_sites_do_not_change_the_verdict():
    found = judge(join(BLOCKS["Q"], BLOCKS["B"]))
    assert (found.verdict, len(found.flat)) == ("shared", 45)
    assert found.statistic == pytest.approx(0.9126, rel=5e-4)


def test_two_sites_are_too_few():
    found = judge(BLOCKS["Q"].take([0, 1]))
    assert (found.verdict, found.reason) == (
        "undetermined",
        "too few sites: 2 with enough points",
    )


def test_a_group_formed_on_its_profiles_is_only_described():
    found = judge(BLOCKS["Q"], descriptive=True)
    assert found.descriptive
    assert "confirms nothing" in plain_words(found)[-1]


def test_reference_groups_may_be_picked_by_the_same_clustering():
    """The eight nearest in fitted time agree nearly as well: the remedy for circles."""
    ordered = [site for _, site in sorted(spread_sites(), key=lambda pair: pair[0])]
    sets = tuple(np.arange(start, start + 8) for start in range(33))
    picked = Reference(profiles=join(*ordered), sets=sets)
    randomly = Reference(profiles=picked.profiles)
    found = judge(BLOCKS["Q"], reference=picked)
    freely = judge(BLOCKS["Q"], reference=randomly)
    assert found.reference_p > 5 * freely.reference_p


def spread_sites():
    """Return 40 sites with times of their own, and these times."""
    rng = np.random.default_rng(12)
    times = 1e-5 * np.exp(np.log(2) * rng.standard_normal(40))
    out = []
    for number, tau in enumerate(times):
        kernel = MODEL.function(FIELDS, np.array([[tau]]))[0]
        true = 2.0 + 0.008 * kernel
        error = 0.03 * true + 0.15
        value = true + error * rng.standard_normal(len(FIELDS))
        one = make_profiles(FIELDS, value, error, name=(f"S{number}",))
        out.append((tau, one))
    return out


def test_the_same_seed_gives_the_same_verdict_and_order_does_not_matter():
    first, again = judge(BLOCKS["Q"]), judge(BLOCKS["Q"])
    assert (first.p_parametric, first.p_wild) == (again.p_parametric, again.p_wild)
    turned = judge(BLOCKS["Q"].take(np.arange(8)[::-1]))
    assert turned.statistic == pytest.approx(first.statistic, rel=1e-6)
    assert turned.value == pytest.approx(first.value, rel=1e-6)


def test_errors_of_another_size_change_nothing_but_the_scale():
    found = judge(BLOCKS["Q"])
    wrong = Profiles(
        name=BLOCKS["Q"].name,
        x=FIELDS,
        value=BLOCKS["Q"].value,
        error=1.5 * BLOCKS["Q"].error,
    )
    scaled = judge(wrong)
    assert scaled.verdict == found.verdict
    assert scaled.statistic == pytest.approx(found.statistic, rel=1e-6)
    assert (scaled.low, scaled.high) == pytest.approx((found.low, found.high), rel=1e-4)
