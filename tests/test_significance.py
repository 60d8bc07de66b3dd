import warnings

import numpy as np
import pytest
from scipy.stats import binom, binomtest

from structmap.motional_units import find_motional_units
from structmap.motional_units.field import make_links
from structmap.significance import (
    Effort,
    choose_verdict,
    cutoffs_to_vary,
    describe_error_scale,
    judge_units,
    list_cautions,
)
from structmap.significance.autocorrelation import (
    adjacency,
    getis_ord_star,
    join_count,
    morans_i,
    normal_scores,
)
from structmap.significance.chance import find_chance
from structmap.significance.placement import order_scorer, random_orders
from structmap.significance.stability import _match, _Sums
from structmap.significance.surrogates import smooth_orders
from tests.test_motional_units import measurements, quiet_with_unit, ring_of_sites


def grid_links(side=11):
    """Cells of a square board, each in contact with those beside and cornerwise."""
    cells = [(i, j) for i in range(side) for j in range(side)]
    number = {cell: k for k, cell in enumerate(cells)}
    pairs = [
        (number[i, j], number[i + di, j + dj])
        for i, j in cells
        for di, dj in ((0, 1), (1, 0), (1, 1), (1, -1))
        if (i + di, j + dj) in number
    ]
    first, second = np.array(pairs).T
    return make_links(len(cells), first, second)


def steady(values):
    """A source that hands out given values one after the other."""
    left = list(values)

    def draw(count):
        taken, left[:] = np.array(left[:count]), left[count:]
        return taken

    return draw


# --- p values -------------------------------------------------------------------------


def test_p_value_counts_the_data_among_the_permutations():
    # Phipson and Smyth (2010), equation 2: (b + 1)/(m + 1); never 0.
    none = find_chance(5.0, steady([0.0] * 99), batch=250, most=99)
    assert (none.p, none.hits, none.tries) == (1 / 100, 0, 99)
    some = find_chance(5.0, steady([9.0] * 9 + [0.0] * 990), batch=250)
    assert (some.p, some.hits, some.tries) == (pytest.approx(10 / 1000), 9, 999)


@pytest.mark.parametrize(
    ("n_hits", "within", "tries"),
    [(0, 299, 299), (3, 299, 299), (4, 299, 999), (28, 999, 999), (29, 999, 2499)],
)
def test_ends_at_a_look_only_where_the_level_is_ruled_out(n_hits, within, tries):
    numbers = np.zeros(9999)
    numbers[np.linspace(0, within - 1, n_hits).astype(int)] = 9.0
    found = find_chance(5.0, steady(numbers.tolist()), batch=250)
    assert (found.hits, found.tries) == (n_hits, tries)
    assert found.p == (1 + n_hits) / (1 + tries)
    # With a chance of 0.05 so few hits come less than once in 2,000 times.
    assert binomtest(n_hits, tries, 0.05, alternative="less").pvalue < 0.0005
    if tries > within:
        assert binomtest(n_hits, within, 0.05, alternative="less").pvalue >= 0.0005


def test_value_equal_to_the_observed_one_is_a_hit():
    assert find_chance(5.0, steady([5.0] * 999), batch=100).p == 1.0


def test_stops_at_the_twentieth_hit_where_the_answer_is_clear():
    # Besag and Clifford (1991): with h hits at the l-th draw, p = h/l.
    every_fifth = [0.0, 0.0, 0.0, 0.0, 9.0] * 200
    for batch in (1, 7, 250):
        found = find_chance(5.0, steady(every_fifth), batch=batch)
        assert (found.p, found.tries) == (20 / 100, 100)


def test_goes_on_where_p_lies_at_the_border():
    one_in_twenty = ([0.0] * 19 + [9.0]) * 500
    found = find_chance(5.0, steady(one_in_twenty), batch=250)
    assert found.tries == 9999
    assert found.p == pytest.approx((1 + 499) / 10000)


@pytest.mark.parametrize("level", [0.01, 0.05, 0.1])
def test_p_values_of_exchangeable_data_are_not_too_small(level):
    rng = np.random.default_rng(17)
    p = [
        find_chance(rng.normal(), rng.standard_normal, batch=250, most=999).p
        for _ in range(400)
    ]
    assert sum(one <= level for one in p) <= binom.ppf(0.999, 400, level)
    assert sum(one <= level for one in p) >= binom.ppf(0.001, 400, level * 0.8)


# --- autocorrelation ------------------------------------------------------------------


def test_morans_i_of_a_chess_board_is_minus_one():
    """Each cell differs from all its neighbours; worked by hand."""
    side = 8
    first = [i * side + j for i in range(side) for j in range(side - 1)]
    beside = [k + 1 for k in first]
    above = [i * side + j for i in range(side - 1) for j in range(side)]
    below = [k + side for k in above]
    links = make_links(64, np.array(first + above), np.array(beside + below))
    colour = np.array([(i + j) % 2 for i in range(side) for j in range(side)], float)
    assert morans_i(colour, adjacency(links)) == pytest.approx(-1)
    assert join_count(colour, adjacency(links)) == 0
    assert join_count(np.ones(64), adjacency(links)) == len(first) + len(above)


def test_agrees_with_esda_on_binary_weights():
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        esda = pytest.importorskip("esda", reason="esda is in the test extra")
        libpysal = pytest.importorskip("libpysal")
        links = grid_links()
        neighbours = {
            i: links.neighbour[links.start[i] : links.start[i + 1]].tolist()
            for i in range(links.n_rows)
        }
        weights = libpysal.weights.W(neighbours, silence_warnings=True)
        values = np.random.default_rng(1).normal(size=links.n_rows) + 3
        moran = esda.Moran(values, weights, transformation="b", permutations=0)
        local = esda.G_Local(values, weights, transform="B", permutations=0, star=True)
        marked = (values > 3).astype(float)
        joins = esda.Join_Counts(marked, weights, permutations=0)
    contacts = adjacency(links)
    assert morans_i(values, contacts) == pytest.approx(moran.I, abs=1e-12)
    np.testing.assert_allclose(getis_ord_star(values, contacts), local.Zs, atol=1e-12)
    assert join_count(marked, contacts) == pytest.approx(joins.bb, abs=1e-12)


def test_morans_i_of_several_fields_at_once():
    links = grid_links()
    fields = np.random.default_rng(2).normal(size=(links.n_rows, 4))
    each = [morans_i(field, adjacency(links)) for field in fields.T]
    np.testing.assert_allclose(morans_i(fields, adjacency(links)), each, rtol=1e-12)


def test_constant_field_has_no_autocorrelation():
    assert morans_i(np.ones(121), adjacency(grid_links())) == 0


# --- surrogates -----------------------------------------------------------------------


def test_surrogates_are_as_smooth_as_the_data():
    graph, centres = ring_of_sites(200)
    rng = np.random.default_rng(3)
    walk = np.convolve(rng.normal(size=205), np.ones(6), mode="valid")
    found = find_motional_units(
        measurements(walk[:, None]), graph, centres, baseline=np.zeros((200, 1))
    )
    contacts = adjacency(found.links)
    height = found.field.value[:, 0]
    target = morans_i(normal_scores(height), contacts)
    source = smooth_orders(found.field, found.links, np.ones(1), rng)
    placed = normal_scores(height[source(200)].T)
    reached = morans_i(placed, contacts)
    assert target > 0.3
    assert reached.mean() == pytest.approx(target, abs=0.06)


def test_surrogates_and_permutations_use_each_row_once():
    graph, centres = ring_of_sites(60)
    found = find_motional_units(measurements(quiet_with_unit(60)), graph, centres)
    rng = np.random.default_rng(4)
    for source in (
        random_orders(60, rng),
        smooth_orders(found.field, found.links, np.ones(1), rng),
    ):
        assert (np.sort(source(7), axis=1) == np.arange(60)).all()


def test_laying_permutations_side_by_side_changes_nothing():
    graph, centres = ring_of_sites(90)
    value = quiet_with_unit(90) + 3 * np.random.default_rng(5).normal(size=(90, 1))
    found = find_motional_units(measurements(value), graph, centres)
    orders = random_orders(90, np.random.default_rng(6))(40)
    score = order_scorer(found.field, found.links)
    together = score(orders)
    apart = [score(one[None]) for one in orders]
    np.testing.assert_allclose(together.total, [one.total[0] for one in apart])
    np.testing.assert_allclose(together.largest, [one.largest[0] for one in apart])
    assert together.largest.max() > 0


def test_screening_all_pairs_once_changes_nothing(monkeypatch):
    graph, centres = ring_of_sites(90)
    value = quiet_with_unit(90) + 3 * np.random.default_rng(5).normal(size=(90, 1))
    found = find_motional_units(measurements(value), graph, centres)
    orders = random_orders(90, np.random.default_rng(6))(40)
    once = order_scorer(found.field, found.links)(orders)
    monkeypatch.setattr("structmap.significance.placement.MOST_TABLED", 0)
    each = order_scorer(found.field, found.links)(orders)
    np.testing.assert_array_equal(once.total, each.total)
    np.testing.assert_array_equal(once.largest, each.largest)
    assert once.largest.max() > 0


# --- stability ------------------------------------------------------------------------


def test_best_match_is_the_one_a_plain_loop_finds():
    rng = np.random.default_rng(7)
    label = rng.integers(-1, 3, 40)
    found = rng.integers(-1, 4, (25, 40))
    found = np.where(found >= 0, found + 10 * np.arange(25)[:, None], -1)
    sums = _Sums(3, 40)
    _match(label, found, sums)
    for unit in range(3):
        total, joined = 0.0, np.zeros(40)
        for sample in found:
            names = sorted(set(sample[sample >= 0].tolist()))
            index = [
                ((sample == name) & (label == unit)).sum()
                / ((sample == name) | (label == unit)).sum()
                for name in names
            ]
            total += max(index)
            joined += sample == names[int(np.argmax(index))]
        assert sums.jaccard[unit] == pytest.approx(total)
        np.testing.assert_array_equal(sums.joined[unit], joined)


# --- judging --------------------------------------------------------------------------


def judged(value, *, seed=1, workers=1, n=150, **how):
    graph, centres = ring_of_sites(n)
    found = find_motional_units(measurements(value), graph, centres, **how)
    evidence = judge_units(
        found,
        (graph,),
        rng=np.random.default_rng(seed),
        effort=Effort(most_permutations=199, repeats=12, workers=workers),
    )
    return found, evidence


def test_clear_unit_is_beyond_chance_and_gradient():
    found, evidence = judged(quiet_with_unit(150))
    (unit,) = evidence.units
    assert unit.p_any == unit.p_place == 1 / 200
    assert unit.stability > 0.8
    assert unit.verdict in ("supported", "beyond-gradient")
    assert unit.membership[20:28].min() > 0.8
    assert np.nanmax(np.delete(unit.membership, range(18, 30))) < 0.3
    assert np.isnan(evidence.membership[100])
    assert found.label[24] == 0


def test_scattered_movers_make_no_supported_unit():
    """The same values on random sites: a fifth move, in no place in common."""
    supported = 0
    for seed in range(8):
        value = quiet_with_unit(100, range(20, 40), seed=seed)
        value = np.random.default_rng([seed, 1]).permutation(value)
        evidence = judged(value, seed=seed, n=100)[1]
        supported += any(unit.verdict != "tentative" for unit in evidence.units)
    # At most 5 % are expected; 4 of 8 has a chance below 0.001.
    assert supported < 4


def test_result_depends_on_the_seed_alone():
    value = quiet_with_unit(150, height=5.0)
    one, again = judged(value, seed=3)[1], judged(value, seed=3, workers=2)[1]
    for first, second in zip(one.units, again.units, strict=True):
        assert (first.p_any, first.p_place, first.p_smooth) == (
            second.p_any,
            second.p_place,
            second.p_smooth,
        )
        assert first.stability == second.stability
        np.testing.assert_array_equal(first.membership, second.membership)


def test_global_generator_is_left_alone():
    before = np.random.get_state()[1].copy()  # noqa: NPY002 — it is what is checked
    judged(quiet_with_unit(150))
    np.testing.assert_array_equal(before, np.random.get_state()[1])  # noqa: NPY002


def test_without_units_there_is_nothing_to_judge():
    evidence = judged(np.random.default_rng(8).normal(size=(150, 1)))[1]
    assert evidence.units == ()
    assert evidence.p_any == 1
    assert np.isnan(evidence.membership).all()


def test_stability_needs_a_graph():
    graph, centres = ring_of_sites(120)
    found = find_motional_units(measurements(quiet_with_unit()), graph, centres)
    with pytest.raises(ValueError, match=r"^graphs is empty"):
        judge_units(found, (), rng=np.random.default_rng(1))


@pytest.mark.parametrize(
    ("changed", "verdict"),
    [
        ({}, "beyond-gradient"),
        ({"p_smooth": 0.06}, "supported"),
        ({"p_smooth": np.nan}, "supported"),
        ({"contrast": 0.91}, "graded"),
        ({"contrast": 0.91, "p_smooth": 0.5}, "graded"),
        ({"p_any": 0.051}, "tentative"),
        ({"p_place": 0.051}, "tentative"),
        ({"stability": 0.49}, "tentative"),
        ({"stability": np.nan}, "tentative"),
        ({"contrast": np.nan}, "graded"),
    ],
)
def test_verdict_follows_its_rule(changed, verdict):
    numbers = {
        "p_any": 0.05,
        "p_place": 0.05,
        "p_smooth": 0.05,
        "stability": 0.5,
        "contrast": 0.92,
    }
    assert choose_verdict(**numbers | changed) == verdict


# --- cautions -------------------------------------------------------------------------


def cautions(value, n=120, **given):
    graph, centres = ring_of_sites(n)
    data = measurements(value, **given)
    found = find_motional_units(data, graph, centres)
    evidence = judge_units(
        found,
        (graph,),
        rng=np.random.default_rng(1),
        effort=Effort(most_permutations=99, repeats=4),
    )
    scale = describe_error_scale(found.behaviour, data)
    told = (found.reason, scale, *list_cautions(found, evidence))
    return " ".join(filter(None, told))


def test_errors_far_from_the_scatter_are_told():
    value = quiet_with_unit()
    assert "stated too small" in cautions(value, error=np.full_like(value, 0.3))
    assert "stated too large" in cautions(value, error=np.full_like(value, 3.0))
    assert cautions(value, error=np.ones_like(value)) == ""
    assert cautions(value) == ""


def test_many_movers_and_few_sites_are_told():
    value = np.random.default_rng(2).normal(size=(120, 1))
    value[::3] += 15
    value[1::9] += 15
    assert "move or are in units" in cautions(value, error=np.ones_like(value))
    few = quiet_with_unit(40)
    assert "Only 40 sites" in cautions(few, 40, error=np.ones_like(few))


def test_data_that_tell_nothing_give_their_reason_alone():
    value = np.full((120, 1), 3.0)
    text = cautions(value, error=np.ones_like(value))
    assert text == "No unit can be told: all values are equal."


def test_cutoffs_vary_round_the_chosen_one():
    assert cutoffs_to_vary(4.5) == (4.0, 4.5, 5.0, 6.0)
    assert cutoffs_to_vary(7.5, ca_only=True) == (6.5, 7.5, 8.0, 9.0)
