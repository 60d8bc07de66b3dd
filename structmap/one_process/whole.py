"""Is a whole molecule one cooperative unit, or do few values share it between them."""

from dataclasses import dataclass

import numpy as np

from structmap.one_process.columns import Prepared
from structmap.one_process.engine import describe_fit, make_solver
from structmap.one_process.mixture import Mixture, find_mixture
from structmap.one_process.model import Model
from structmap.one_process.phrases import show_number
from structmap.one_process.profiles import GroupFit, find_flat_sites

_MOST_VALUES = 5
_LISTED = 12


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class WholeMolecule:
    """The shared values of a whole molecule and the sites that follow each.

    Attributes
    ----------
    mixture : Mixture
        Values and members, their number chosen by cross-validation.
    fits : tuple of GroupFit
        Of the members of each value, rising.
    n_flat : int
        Profiles without information, which are left out.
    """

    mixture: Mixture
    fits: tuple[GroupFit, ...]
    n_flat: int


def describe_whole(
    prepared: Prepared, *, rng: np.random.Generator
) -> WholeMolecule | None:
    """Return how many shared values a whole molecule needs, and where they lie.

    Parameters
    ----------
    prepared : Prepared
        Profiles of all sites.
    rng : numpy.random.Generator
        Starts of the search and the folds.

    Returns
    -------
    WholeMolecule or None
        None where fewer than three profiles carry information.
    """
    model, profiles = prepared.model, prepared.profiles
    useful = profiles.present.sum(axis=1) >= _fewest(model)
    flat = np.zeros(len(useful), dtype=bool)
    if model.baseline != "none":
        flat = find_flat_sites(profiles) & useful
    kept = profiles.take(useful & ~flat)
    if len(kept.name) < 3:
        return None
    mixture = find_mixture(kept, model, rng=rng, most=_MOST_VALUES)
    fits = tuple(
        describe_fit(make_solver(model, kept.take(mixture.member == number)))
        for number in range(len(mixture.values))
    )
    return WholeMolecule(mixture=mixture, fits=fits, n_flat=int(flat.sum()))


def _fewest(model: Model) -> int:
    """Return points without which nothing can be held out."""
    return max(model.min_points, model.n_own + model.n_shared + 2, 5)


def whole_words(whole: WholeMolecule) -> tuple[str, ...]:
    """Return in sentences whether a molecule follows one value, or which.

    Parameters
    ----------
    whole : WholeMolecule
        What was found.

    Returns
    -------
    tuple of str
        How many values, which sites follow each, how sure their assignment is.
    """
    n_sites = len(whole.mixture.member)
    parameter = whole.fits[0].model.shared.name
    if len(whole.fits) == 1:
        return (
            f"The whole molecule: one value serves all {n_sites} informative sites, "
            f"{_value_phrase(whole.fits[0])}; more values predict points held out no "
            "better, which agrees with one cooperative unit.",
        )
    count = len(whole.fits)
    more = " or more" if count == _MOST_VALUES else ""
    parts = [_part_phrase(fit) for fit in whole.fits]
    unsure = int((whole.mixture.probability < 0.95).sum())
    text = (
        f"The whole molecule: {count}{more} values of {parameter} predict points held "
        f"out best, so it is not one unit: {'; '.join(parts)}."
    )
    if not unsure:
        return (text,)
    noun = "site follows" if unsure == 1 else "sites follow"
    return (
        text,
        f"{unsure} {noun} its value with less than 95 % probability."
        if unsure == 1
        else f"{unsure} {noun} their value with less than 95 % probability.",
    )


def _part_phrase(fit: GroupFit) -> str:
    names = fit.profiles.name
    shown = " ".join(names[:_LISTED])
    if len(names) > _LISTED:
        shown += f" and {len(names) - _LISTED} more"
    noun = "site" if len(names) == 1 else "sites"
    return f"{_value_phrase(fit)} at {len(names)} {noun} ({shown})"


def _value_phrase(fit: GroupFit) -> str:
    unit, name = fit.model.shared.unit, fit.model.shared.name
    text = f"{name} {show_number(fit.best, unit)}"
    if np.isfinite(fit.low) and np.isfinite(fit.high):
        low, high = show_number(fit.low, unit), show_number(fit.high, unit)
        text += f" ({low} to {high})"
    return text


def whole_rows(whole: WholeMolecule, columns: tuple[str, ...]) -> list[dict[str, str]]:
    """Return rows for ``one_process.csv``: one a value, none where one serves all.

    Parameters
    ----------
    whole : WholeMolecule
        What was found.
    columns : tuple of str
        Columns of the table.

    Returns
    -------
    list of dict of str to str
        Without verdict, for the members were picked for their likeness.
    """
    if len(whole.fits) == 1:
        return []
    rows = []
    for number, fit in enumerate(whole.fits, 1):
        shared = fit.model.shared
        known = {
            "group": f"all: value {number}",
            "n_sites": str(len(fit.profiles.name)),
            "model": fit.model.name,
            "parameter": shared.name,
            "unit": shared.unit,
            "value": _number(fit.best),
            "low": _number(fit.low),
            "high": _number(fit.high),
            "sites": " ".join(fit.profiles.name),
        }
        rows.append({column: known.get(column, "") for column in columns})
    return rows


def _number(value: float) -> str:
    return f"{value:.6g}" if np.isfinite(value) else ""
