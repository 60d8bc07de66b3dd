"""The plain way, for comparison: filter sites, filter edges, take connected parts."""

import numpy as np

from structmap.motional_units.background import Samples, fit_background
from structmap.motional_units.field import (
    Field,
    Floats,
    Integers,
    Links,
    chi2_limits,
    make_field,
    make_links,
)
from structmap.motional_units.grouping import PAIR_CHANCE
from structmap.motional_units.refinement import SMALLEST_UNIT, split_connected

ALIKE_CHANCE = 0.01


def find_edge_filter_units(samples: Samples, links: Links, basis: Floats) -> Integers:
    """Return the units of the plain method.

    A site moves when it is off the column medians beyond chance 0.001; an edge stays
    when both ends move and differ by no more than chance 0.01; connected parts of
    three or more sites are units.

    Parameters
    ----------
    samples : Samples
        One sample of the values.
    links : Links
        Who touches whom.
    basis : ndarray of float, shape (n_rows, 1) or (n_rows, 0)
        Constant term, or none when the baseline is given.

    Returns
    -------
    ndarray of int, shape (n_rows,)
        Unit numbers from 1, 0 for none.
    """
    if links.n_rows < SMALLEST_UNIT:
        return np.zeros(links.n_rows, np.int64)
    all_rows = np.ones(samples.value.shape[:2], bool)
    plain = fit_background(samples, all_rows, basis)
    if not plain.scale[0] > 0:
        return np.zeros(links.n_rows, np.int64)
    field = make_field(
        samples.value[0] - plain.value[0],
        (plain.scale[0] * samples.error) ** 2,
        seen=samples.seen,
        lost=samples.lost,
    )
    return _connect(field, links)


def _connect(field: Field, links: Links) -> Integers:
    n_columns = field.value.shape[1]
    moving = field.power >= chi2_limits(1 - PAIR_CHANCE, n_columns)[field.freedom]
    keep = moving[links.first] & moving[links.second]
    first, second = links.first[keep], links.second[keep]
    seen = (field.weight[first] > 0) & (field.weight[second] > 0)
    difference = (field.value[first] - field.value[second]) * seen
    variance = field.variance[first] + field.variance[second]
    common = field.freedom[first] if seen.shape[1] == 1 else seen.sum(1)
    alike = (difference**2).sum(1) / variance <= chi2_limits(
        1 - ALIKE_CHANCE, n_columns
    )[common]
    left = make_links(
        links.n_rows, first[alike & (common > 0)], second[alike & (common > 0)]
    )
    part = split_connected(left, np.zeros(links.n_rows, np.int64))
    size = np.bincount(part[part >= 0], minlength=1)
    large = (part >= 0) & (size[part] >= SMALLEST_UNIT)
    out = np.zeros(links.n_rows, np.int64)
    out[large] = np.unique(part[large], return_inverse=True)[1] + 1
    return out
