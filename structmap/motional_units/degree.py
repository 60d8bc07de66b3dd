"""The search for one degree of the trend, and the choice between degrees."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import csr_array

from structmap.motional_units.apart import find_near
from structmap.motional_units.background import Background, Samples, fit_background
from structmap.motional_units.field import (
    Booleans,
    Field,
    Floats,
    Integers,
    Links,
    chi2_limits,
    make_field,
    tile_links,
)
from structmap.motional_units.refinement import find_groups, weigh_groups

MOST_ROUNDS = 4
FEWEST_RESTING, RESTING_SHARE = 20, 0.4
# A site outside all units cannot cost more than this chance, so that single movers
# do not drive the choice of the trend.
STRAY_CHANCE = 1e-4
# Contacts within which sites do not tell each other's trend. Points of a profile pay
# for each term of a trend many times over, which guards them already.
STEPS_APART = 2


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class DegreeFit:
    """Background and units for one degree of the trend.

    Attributes
    ----------
    background : Background
        Baselines and error scales of the samples.
    label : ndarray of int, shape (n_samples, n_rows)
        Units, numbered over all samples; -1 for none.
    n_terms : int
        Terms of the trend.
    """

    background: Background
    label: Integers
    n_terms: int


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ChosenFits:
    """The best degree of each sample.

    Attributes
    ----------
    degree : ndarray of int, shape (n_samples,)
        Place among the bases.
    background : ndarray of float, shape (n_samples, n_rows, n_columns)
        Baselines.
    scale : ndarray of float, shape (n_samples,)
        Error scales.
    label : ndarray of int, shape (n_samples, n_rows)
        Units; -1 for none; numbers differ between samples.
    error : ndarray of float, shape (n_samples, n_rows)
        Errors of the rows with those of their baselines, not yet scaled.
    """

    degree: Integers
    background: Floats
    scale: Floats
    label: Integers
    error: Floats


def search_samples(
    samples: Samples,
    links: Links,
    *,
    bases: tuple[Floats, ...],
    rounds: int = MOST_ROUNDS,
    direction: int = 0,
) -> ChosenFits:
    """Search each sample with every degree of the trend and take the best degree.

    Parameters
    ----------
    samples : Samples
        Values.
    links : Links
        Who touches whom, of one sample.
    bases : tuple of ndarray of float, shape (n_rows, n_terms)
        Terms of the trend for each degree; no term for a given baseline.
    rounds : int
        Most rounds of background and units.
    direction : int
        1 or -1 to let only units that deviate upwards or downwards count.

    Returns
    -------
    ChosenFits
        One a sample.
    """
    tiled = tile_links(links, len(samples.value))
    near = None if samples.is_profile else find_near(links, STEPS_APART)
    fits = [
        _search_degree(samples, tiled, basis, near=near, how=(rounds, direction))
        for basis in bases
    ]
    common = np.min([fit.background.scale for fit in fits], axis=0)
    worth = np.stack([_judge_degree(samples, tiled, fit, common) for fit in fits])
    best = np.argmax(worth, axis=0)
    pick = np.arange(len(best))
    return ChosenFits(
        degree=best,
        background=np.stack([fit.background.value for fit in fits])[best, pick],
        scale=np.stack([fit.background.scale for fit in fits])[best, pick],
        label=np.stack([fit.label for fit in fits])[best, pick],
        error=np.stack([fit.background.error for fit in fits])[best, pick],
    )


def _search_degree(
    samples: Samples,
    tiled: Links,
    basis: Floats,
    *,
    near: csr_array | None,
    how: tuple[int, int],
) -> DegreeFit:
    rounds, direction = how
    shape = samples.value.shape[:2]
    label = np.full(shape, -1, np.int64)
    for number in range(rounds):
        background = fit_background(samples, choose_resting(label), basis, near=near)
        field = flat_field(samples, background, direction=direction)
        new = find_groups(field, tiled).label.reshape(shape)
        done = number > 0 and np.array_equal(new, label)
        label = new
        if done:
            break
    return DegreeFit(background=background, label=label, n_terms=basis.shape[1])


def choose_resting(label: Integers) -> Booleans:
    """Return the rows that carry the baseline: those in no unit.

    Parameters
    ----------
    label : ndarray of int, shape (n_samples, n_rows)
        Units, -1 for none.

    Returns
    -------
    ndarray of bool, shape (n_samples, n_rows)
        All rows of a sample where too few would remain.
    """
    resting = label < 0
    n_rows = label.shape[1]
    few = resting.sum(1) < max(FEWEST_RESTING, RESTING_SHARE * n_rows)
    out: Booleans = resting | few[:, None]
    return out


def flat_field(samples: Samples, background: Background, *, direction: int) -> Field:
    """Return the deviations of all samples laid side by side.

    Parameters
    ----------
    samples : Samples
        Values.
    background : Background
        Baselines, error scales and errors.
    direction : int
        Which way units may deviate.

    Returns
    -------
    Field
        Of ``n_samples * n_rows`` rows.
    """
    n_samples, n_rows, n_columns = samples.value.shape
    # A scale of 0 (all values equal) would divide by 0; such a field has no deviations.
    safe = np.where(background.scale > 0, background.scale, 1.0)
    seen = None if samples.seen is None else np.tile(samples.seen, (n_samples, 1))
    return make_field(
        (samples.value - background.value).reshape(n_samples * n_rows, n_columns),
        ((safe[:, None] * background.error) ** 2).ravel(),
        seen=seen,
        lost=samples.lost,
        direction=direction,
    )


def _judge_degree(
    samples: Samples, tiled: Links, fit: DegreeFit, common: Floats
) -> Floats:
    """Return the log-likelihood on a common error scale less the price of terms."""
    n_samples, n_rows = fit.label.shape
    field = flat_field(samples, replace(fit.background, scale=common), direction=0)
    label = fit.label.ravel()
    limits = chi2_limits(1 - STRAY_CHANCE, field.value.shape[1])[field.freedom]
    stray = np.where(label < 0, np.minimum(field.power, limits), field.power)
    group = weigh_groups(field, tiled, label)
    energy = np.bincount(group.first_row // n_rows, group.energy, minlength=n_samples)
    price = max(fit.n_terms - 1, 0) * int(field.freedom.max(initial=1))
    unsure = _price_of_prediction(samples, fit.background)
    out: Floats = (
        energy - 0.5 * stray.reshape(n_samples, n_rows).sum(1) - price - unsure
    )
    return out


def _price_of_prediction(samples: Samples, background: Background) -> Floats:
    """Return what wider errors of predicted baselines cost in log-likelihood.

    Nothing for a profile, whose baseline is not predicted: predicted and charged once,
    smooth fields ended as units in 17 % of planted profiles without one.
    """
    wider = np.log(background.error / samples.error)
    out: Floats = (samples.freedom() * wider).sum(1)
    return out
