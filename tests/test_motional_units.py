import numpy as np
import pytest
from scipy.spatial.transform import Rotation
from scipy.stats import chi2, false_discovery_control

from structmap.behaviour import Measurements, control_false_discovery
from structmap.contacts import SiteGraph
from structmap.motional_units import find_motional_units
from structmap.motional_units.field import chi2_limits, make_field, make_links
from structmap.motional_units.grouping import grow_seeds, screen_pairs, unlikeness
from structmap.motional_units.refinement import (
    sum_profiles,
    weigh_belonging,
    weigh_groups,
)


def four_sites():
    """A unit of three sites and a neighbour that does not belong."""
    links = make_links(4, np.array([0, 1, 0, 2]), np.array([1, 2, 2, 3]))
    return (
        make_field(np.array([[5.0], [4.0], [6.0], [0.5]]), np.ones(4), seen=None),
        # The worth of an edge as on a graph of the usual degree.
        type(links)(
            **{name: getattr(links, name) for name in links.__slots__} | {"factor": 1.0}
        ),
    )


def test_limit_of_the_pair_screen_is_the_chi_square_quantile():
    # Abramowitz and Stegun, table 26.8, gives 10.828 for one degree at 0.001.
    assert chi2_limits(1 - 1e-3, 1)[1] == pytest.approx(10.82757, abs=5e-6)


def test_gain_and_energy_of_a_unit_worked_by_hand():
    field, links = four_sites()
    label = np.array([0, 0, 0, -1])
    sites = np.arange(4)
    gain = weigh_belonging(
        field, sum_profiles(field, label), site=sites, unit=0 * sites, inside=label == 0
    ).gain
    assert gain == pytest.approx([12.041855, 7.086397, 17.094363, -4.637935], abs=1e-6)
    group = weigh_groups(field, links, label)
    assert group.energy == pytest.approx([28.122614], abs=1e-6)
    # Gains capped at 8, price 3.5 a member, 4 an edge; by hand from the gains above.
    # Leaving out site 2 (mean 4.5 of two, variance 1 + 1/2): its misfit is
    # (6 - 4.5)^2/(1.5 + 0.04 * 4.5^2) = 0.974, below its one degree of freedom.
    assert group.capped_energy == pytest.approx([23.086397 - 10.5 + 12], abs=1e-6)


def test_members_unlike_their_unit_are_charged_in_the_tests_of_chance():
    """The same chance cluster of two kinds, the difference worked by hand."""
    links = make_links(4, np.array([0, 1, 2, 0]), np.array([1, 2, 3, 3]))
    value = np.array([[9.0, 0], [9, 0], [9, 0], [9, 8]])
    group = weigh_groups(
        make_field(value, np.ones(4), seen=None), links, np.zeros(4, int)
    )
    excess = []
    for i in range(4):
        mean = np.delete(value, i, axis=0).mean(0)
        covariance = (1 + 1 / 3) * np.eye(2) + 0.04 * np.outer(mean, mean)
        off = value[i] - mean
        excess.append(max(0, off @ np.linalg.solve(covariance, off) - 2) / 2)
    # All gains reach the cap of 8.
    expected = 4 * (8 - 3.5) + 4 * links.factor * 4 - 1.5 * sum(excess)
    assert sum(excess) > 10
    assert group.capped_energy == pytest.approx([expected], rel=1e-9)


def test_unlikeness_of_a_pair_worked_by_hand():
    field, links = four_sites()
    pairs = screen_pairs(field, links)
    assert (pairs.first.tolist(), pairs.second.tolist()) == ([0, 0, 1, 2], [1, 2, 2, 3])
    assert pairs.cost[0] == pytest.approx(0.2762431, abs=1e-7)


def test_pair_of_profiles_with_unequal_errors_worked_by_hand():
    value = np.array([[3.0, 2, 0], [2.5, 2.5, 0.5], [3.5, 1.5, -0.5]])
    field = make_field(value, np.array([1.0, 1, 4]), seen=None)
    pairs = screen_pairs(field, make_links(3, np.array([0]), np.array([2])))
    assert pairs.cost == pytest.approx([0.1488842], abs=1e-7)
    label = np.array([-1, 0, 0])
    gain = weigh_belonging(
        field,
        sum_profiles(field, label),
        site=np.array([0]),
        unit=np.array([0]),
        inside=np.array([False]),
    ).gain
    assert gain == pytest.approx([5.419287], abs=1e-6)


def test_unlikeness_is_the_quadratic_form_of_the_full_covariance():
    rng = np.random.default_rng(5)
    difference, mean = rng.normal(size=(2, 7, 6))
    precision = rng.uniform(0.2, 3, (7, 6))
    scatter = rng.uniform(0, 0.5, 7)
    found = unlikeness(difference, precision, scatter, mean)
    for row in range(7):
        covariance = np.diag(1 / precision[row]) + scatter[row] * np.outer(
            mean[row], mean[row]
        )
        expected = difference[row] @ np.linalg.solve(covariance, difference[row])
        assert found[row] == pytest.approx(expected, rel=1e-10)


def test_gain_is_a_ratio_of_normal_likelihoods():
    """The gain against a slow computation with full covariance matrices."""
    rng = np.random.default_rng(8)
    value, variance = rng.normal(size=(5, 4)) + 2, rng.uniform(0.5, 2, 5)
    field = make_field(value, variance, seen=None)
    label = np.array([0, 0, 0, -1, 0])
    site = np.arange(5)
    found = weigh_belonging(
        field, sum_profiles(field, label), site=site, unit=0 * site, inside=label == 0
    ).gain
    for i in range(5):
        others = np.array([j for j in (0, 1, 2, 4) if j != i])
        weight = 1 / variance[others]
        mean = weight @ value[others] / weight.sum()
        covariance = (variance[i] + 1 / weight.sum()) * np.eye(4) + 0.04 * np.outer(
            mean, mean
        )
        inside = -0.5 * np.linalg.slogdet(covariance)[1] - 0.5 * (
            (value[i] - mean) @ np.linalg.solve(covariance, value[i] - mean)
        )
        outside = (
            -0.5 * 4 * np.log(variance[i]) - 0.5 * value[i] @ value[i] / variance[i]
        )
        assert found[i] == pytest.approx(inside - outside, rel=1e-9)


def test_missing_columns_count_as_if_they_did_not_exist():
    """Sites without a third column against the same sites in two columns."""
    value = np.array([[5.0, 4, 9], [4.5, 4.2, 9], [5.2, 3.9, 9]])
    seen = np.array([[True, True, False]] * 3)
    full = make_field(value[:, :2], np.ones(3), seen=None)
    holes = make_field(value, np.ones(3), seen=seen)
    links = make_links(3, np.array([0, 0, 1]), np.array([1, 2, 2]))
    whole, partly = screen_pairs(full, links), screen_pairs(holes, links)
    assert partly.cost == pytest.approx(whole.cost, rel=1e-12)
    assert holes.freedom.tolist() == [2, 2, 2]
    label = np.zeros(3, np.int64)
    assert weigh_groups(holes, links, label).energy == pytest.approx(
        weigh_groups(full, links, label).energy, rel=1e-12
    )
    assert grow_seeds(holes, partly).tolist() == [0, 0, 0]


def test_false_discovery_control_agrees_with_scipy():
    p_values = np.random.default_rng(3).uniform(size=200) ** 2
    expected = false_discovery_control(p_values)
    np.testing.assert_allclose(control_false_discovery(p_values), expected, rtol=1e-13)


def test_chance_of_a_pair_is_what_the_screen_says():
    """Pairs of one profile with errors only pass the likeness limit but for 0.1 %."""
    rng = np.random.default_rng(11)
    value = rng.normal(size=(40000, 3)) + np.array([9.0, 8, 7])
    field = make_field(value, np.ones(40000), seen=None)
    first = np.arange(0, 40000, 2)
    kept = len(screen_pairs(field, make_links(40000, first, first + 1)).first)
    # The amplitude may scatter besides, so at least the nominal share passes.
    assert kept >= 20000 * (1 - 1e-3) - 3 * np.sqrt(20)
    assert chi2.sf(chi2_limits(1 - 1e-3, 3)[3], 3) == pytest.approx(1e-3)


def ring_of_sites(n):
    """Sites on a closed band, each in contact with its next four neighbours."""
    angle = 2 * np.pi * np.arange(n) / n
    centres = np.stack(
        [20 * np.cos(angle), 20 * np.sin(angle), 2 * np.cos(5 * angle)], axis=1
    )
    pairs = {
        tuple(sorted((i, (i + step) % n))) for i in range(n) for step in (1, 2, 3, 4)
    }
    first, second = np.array(sorted(pair for pair in pairs if pair[0] != pair[1])).T
    graph = SiteGraph(
        n_sites=n,
        site_1=first,
        site_2=second,
        kind=np.zeros(len(first)),
        distance_angstrom=np.full(len(first), 4.0),
    )
    return graph, centres


def measurements(value, error=None, **changes):
    value = np.asarray(value, float)
    known = {
        "site": np.arange(len(value)),
        "value": value,
        "error": np.ones_like(value) if error is None else error,
        "column": tuple(f"column {k}" for k in range(value.shape[1])),
        "is_profile": False,
        "part": "whole",
        "errors_given": error is not None,
        "point_kept": np.zeros(0, bool),
        "point_reason": (),
        "notes": (),
    }
    return Measurements(**known | changes)


def quiet_with_unit(n=120, members=range(20, 28), height=8.0, seed=4):
    value = np.random.default_rng(seed).normal(size=(n, 1)) + 50
    value[list(members)] += height
    return value


def test_finds_a_planted_unit_and_nothing_else():
    graph, centres = ring_of_sites(120)
    found = find_motional_units(measurements(quiet_with_unit()), graph, centres)
    assert [members.tolist() for members in found.members] == [list(range(20, 28))]
    assert found.behaviour.error_scale == pytest.approx(1, abs=0.2)
    assert found.behaviour.moves[20:28].all()
    assert found.reason == ""


@pytest.mark.parametrize("factor", [0.5, 2.0])
def test_misreported_errors_change_the_scale_and_nothing_else(factor):
    graph, centres = ring_of_sites(120)
    value = quiet_with_unit()
    one = find_motional_units(measurements(value, np.ones_like(value)), graph, centres)
    other = find_motional_units(
        measurements(value, np.full_like(value, factor)), graph, centres
    )
    assert other.label.tolist() == one.label.tolist()
    assert other.behaviour.error_scale * factor == pytest.approx(
        one.behaviour.error_scale
    )
    np.testing.assert_allclose(other.energy, one.energy, rtol=1e-9)


def test_unit_of_measurement_does_not_matter():
    graph, centres = ring_of_sites(120)
    value = quiet_with_unit()
    one = find_motional_units(measurements(value), graph, centres)
    other = find_motional_units(measurements(1e-6 * value), graph, centres)
    assert other.label.tolist() == one.label.tolist()


def test_turning_and_moving_the_molecule_does_not_matter():
    graph, centres = ring_of_sites(150)
    value = quiet_with_unit(150) + 0.15 * centres[:, :1]
    turn = Rotation.from_euler("xyz", [0.4, -1.1, 2.0]).as_matrix()
    one = find_motional_units(measurements(value), graph, centres)
    other = find_motional_units(
        measurements(value), graph, centres @ turn.T + [5, -80, 3]
    )
    assert other.label.tolist() == one.label.tolist()
    assert other.behaviour.degree == one.behaviour.degree > 0
    np.testing.assert_allclose(other.energy, one.energy, rtol=1e-6)


def test_order_of_rows_does_not_matter():
    graph, centres = ring_of_sites(120)
    value = quiet_with_unit()
    order = np.random.default_rng(2).permutation(120)
    place = np.argsort(order)
    low = np.minimum(place[graph.site_1], place[graph.site_2])
    high = np.maximum(place[graph.site_1], place[graph.site_2])
    sort = np.lexsort((high, low))
    shuffled = SiteGraph(
        n_sites=120,
        site_1=low[sort],
        site_2=high[sort],
        kind=graph.kind,
        distance_angstrom=graph.distance_angstrom,
    )
    one = find_motional_units(measurements(value), graph, centres)
    other = find_motional_units(measurements(value[order]), shuffled, centres[order])
    found = sorted(sorted(order[members].tolist()) for members in other.members)
    assert found == sorted(members.tolist() for members in one.members)


def test_smooth_trend_is_taken_into_the_baseline():
    graph, centres = ring_of_sites(150)
    rng = np.random.default_rng(6)
    value = rng.normal(size=(150, 6)) + 0.2 * centres[:, :1]
    found = find_motional_units(measurements(value), graph, centres)
    assert found.members == ()
    assert found.behaviour.degree >= 1
    assert found.behaviour.trend_share > 0.5


def test_direction_lets_only_units_of_that_sign_count():
    graph, centres = ring_of_sites(120)
    value = quiet_with_unit()
    value[60:68] -= 8
    both = find_motional_units(measurements(value), graph, centres)
    up = find_motional_units(measurements(value), graph, centres, direction="up")
    down = find_motional_units(measurements(value), graph, centres, direction="down")
    assert len(both.members) == 2
    assert [members.tolist() for members in up.members] == [list(range(20, 28))]
    assert [members.tolist() for members in down.members] == [list(range(60, 68))]
    assert not up.behaviour.moves[60:68].any()


def test_given_baseline_is_used_as_it_is():
    graph, centres = ring_of_sites(120)
    reference = np.random.default_rng(9).normal(size=120) * 30
    value = quiet_with_unit() + reference[:, None]
    found = find_motional_units(
        measurements(value), graph, centres, baseline=reference[:, None] + 50
    )
    assert [members.tolist() for members in found.members] == [list(range(20, 28))]
    np.testing.assert_allclose(found.behaviour.background, reference[:, None] + 50)


def test_separate_quantities_with_holes_form_a_unit():
    graph, centres = ring_of_sites(120)
    rng = np.random.default_rng(12)
    value = rng.normal(size=(120, 3))
    value[20:28] += [6, -6, 6]
    value[rng.uniform(size=value.shape) < 0.25] = np.nan
    value[np.isnan(value).all(1), 0] = 0.0
    error = np.where(np.isfinite(value), 1.0, np.nan)
    found = find_motional_units(measurements(value, error), graph, centres)
    assert [members.tolist() for members in found.members] == [list(range(20, 28))]


def test_edge_filter_stands_beside_it():
    graph, centres = ring_of_sites(120)
    found = find_motional_units(
        measurements(quiet_with_unit(height=12)), graph, centres
    )
    assert np.flatnonzero(found.behaviour.edge_filter_unit).tolist() == list(
        range(20, 28)
    )


@pytest.mark.parametrize(
    ("value", "reason"),
    [
        (np.zeros((0, 1)), "no site has enough values"),
        (np.ones((1, 1)), "only one site"),
        (np.array([[1.0], [2.0]]), "only two sites"),
        (np.full((30, 2), 7.0), "all values are equal"),
    ],
)
def test_data_that_can_tell_nothing_say_why(value, reason):
    graph, centres = ring_of_sites(30)
    found = find_motional_units(measurements(value), graph, centres)
    assert reason in found.reason
    assert found.members == ()
    assert not found.behaviour.moves.any()
    assert np.isfinite(found.behaviour.deviation).all()


def test_without_contacts_no_unit_can_be_told():
    _, centres = ring_of_sites(60)
    alone = SiteGraph(
        n_sites=60,
        site_1=np.zeros(0),
        site_2=np.zeros(0),
        kind=np.zeros(0),
        distance_angstrom=np.zeros(0),
    )
    found = find_motional_units(
        measurements(quiet_with_unit(60, range(20, 23))), alone, centres
    )
    assert found.members == ()
    assert "no two measured sites touch" in found.reason
    assert found.behaviour.moves[20:23].all()


def test_one_wild_value_does_not_sink_the_rest():
    graph, centres = ring_of_sites(120)
    value = quiet_with_unit()
    value[90] = 1e9
    found = find_motional_units(measurements(value), graph, centres)
    assert [members.tolist() for members in found.members] == [list(range(20, 28))]
