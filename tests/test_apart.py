"""Baselines told from apart: against refits, and on a molecule with a mobile end."""

from dataclasses import replace

import numpy as np
import pytest

from structmap.behaviour import Measurements
from structmap.contacts import SiteGraph
from structmap.motional_units import find_motional_units
from structmap.motional_units.apart import find_near, predict_apart
from structmap.motional_units.field import make_links


def some_links(rng, n_rows):
    """A chain with a few contacts far along it."""
    first = np.r_[np.arange(n_rows - 1), rng.integers(0, n_rows // 2, 5)]
    second = np.r_[np.arange(1, n_rows), rng.integers(n_rows // 2, n_rows, 5)]
    pairs = np.unique(np.stack([first, second]), axis=1)
    return make_links(n_rows, pairs[0], pairs[1])


@pytest.mark.parametrize("steps", [1, 2])
def test_each_prediction_is_a_refit_without_the_rows_near(steps):
    rng = np.random.default_rng(3)
    n_rows, links = 30, some_links(rng, 30)
    basis = np.linalg.qr(rng.normal(size=(n_rows, 4)))[0]
    value, weight = rng.normal(size=(2, n_rows, 3)), rng.uniform(0.2, 2, (2, n_rows))
    near = find_near(links, steps)
    told = predict_apart(value, weight, basis, near=near, seen=None)
    dense = near.toarray() > 0
    for row in range(n_rows):
        kept = ~dense[row]
        for sample in range(2):
            root = np.sqrt(weight[sample, kept])[:, None]
            design, data = root * basis[kept], root * value[sample, kept]
            fit = np.linalg.lstsq(design, data, rcond=None)[0]
            np.testing.assert_allclose(
                told.value[sample, row], basis[row] @ fit, rtol=1e-5
            )
            spread = basis[row] @ np.linalg.inv(design.T @ design) @ basis[row]
            assert told.variance[sample, row] == pytest.approx(spread, rel=1e-5)


def test_near_is_what_lies_within_the_steps():
    links = make_links(5, np.array([0, 1, 2, 3]), np.array([1, 2, 3, 4]))
    apart = np.abs(np.subtract.outer(np.arange(5), np.arange(5)))
    for steps in (1, 2):
        near = find_near(links, steps).toarray()
        np.testing.assert_array_equal(near, (apart <= steps).astype(float))


def numbers(value, error):
    n_sites, n_columns = value.shape
    return Measurements(
        site=np.arange(n_sites),
        value=value,
        error=error,
        column=tuple(f"q{k}" for k in range(n_columns)),
        is_profile=False,
        part="whole",
        errors_given=True,
        point_kept=np.zeros(0, bool),
        point_reason=(),
        notes=(),
    )


def folded_chain(n_sites):
    """A compact walk through a cube with a straight tail of six sites at its end."""
    side = int(np.ceil((n_sites - 6) ** (1 / 3)))
    cells = []
    for z in range(side):
        for y in range(side):
            row = [(x, y if z % 2 == 0 else side - 1 - y, z) for x in range(side)]
            cells += row if y % 2 == 0 else row[::-1]
    cube = np.array(cells[: n_sites - 6], float)
    tail = cube[-1] + np.arange(1, 7)[:, None] * np.array([0.0, 0.0, 1.0])
    centres = 5.0 * np.concatenate([cube, tail])
    apart = np.linalg.norm(centres[:, None] - centres[None], axis=2)
    first, second = np.nonzero(np.triu(apart < 7.5, 1))
    graph = SiteGraph(
        n_sites=n_sites,
        site_1=first,
        site_2=second,
        kind=np.zeros(len(first), int),
        distance_angstrom=np.full(len(first), 4.0),
    )
    return centres, graph


@pytest.mark.parametrize("seed", range(5))
def test_a_mobile_end_is_a_unit_and_no_trend(seed):
    # Ends of a chain that move more the nearer they are to the end: common practice in
    # relaxation of folded proteins, no source.
    centres, graph = folded_chain(70)
    rng = np.random.default_rng(seed)
    value = rng.normal(10.0, 1.0, (70, 1))
    value[-6:, 0] -= np.array([9, 10, 11, 12, 13, 14])
    search = find_motional_units(numbers(value, np.ones((70, 1))), graph, centres)
    assert search.behaviour.moves[-6:].all()
    assert any(set(range(65, 70)) <= set(unit.tolist()) for unit in search.members)


def test_each_quantity_has_an_error_scale_of_its_own():
    centres, graph = folded_chain(70)
    rng = np.random.default_rng(8)
    value = rng.normal(10.0, 1.0, (70, 2))
    value[20:26, 1] += 9
    error = np.column_stack([np.full(70, 0.1), np.ones(70)])
    search = find_motional_units(numbers(value, error), graph, centres)
    # With one scale for both the first quantity, whose errors are stated ten times too
    # small, would make most sites move.
    assert search.behaviour.moves[20:26].all()
    assert search.behaviour.moves.sum() <= 10


@pytest.mark.parametrize("n_columns", [1, 10])
def test_in_quiet_molecules_something_moves_no_more_often_than_said(n_columns):
    centres, graph = folded_chain(64)
    rng = np.random.default_rng(40 + n_columns)
    n_sets, some = 120, 0
    for _ in range(n_sets):
        value = rng.normal(10.0, 1.0, (64, n_columns))
        quiet = replace(numbers(value, np.ones(value.shape)), is_profile=n_columns > 1)
        some += find_motional_units(quiet, graph, centres).behaviour.moves.any()
    # False discoveries are held to 5 %, and where nothing moves all are false; three
    # standard errors of 120 sets on top. Chi-square instead of F gave 13 to 20 %.
    assert some / n_sets <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / n_sets)
    assert some > 0
