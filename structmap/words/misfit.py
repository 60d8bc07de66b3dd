"""The misfit of a unit over the value that its sites may share, in words."""

import numpy as np

from structmap.one_process import GroupFit, OneProcess, show_number
from structmap.result import AnalysisRecord
from structmap.words.names import fitted_site_names, number_in_words


def shown_fit(process: OneProcess) -> GroupFit | None:
    """Return the fit that value and interval of a group come from.

    Parameters
    ----------
    process : OneProcess
        Of a group.

    Returns
    -------
    GroupFit or None
        That of the sites that share one value where others are set apart.
    """
    return process.kept_fit or process.fit


def misfit_caption(record: AnalysisRecord, process: OneProcess) -> tuple[str, ...]:
    """Return what a plot of chi-square against the shared value shows.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    process : OneProcess
        Of a group that was fitted.

    Returns
    -------
    tuple of str
        Sentences: where one value fits best, how far it may move within the errors,
        and what a value for each site would gain. Empty without a fit.
    """
    fit = shown_fit(process)
    if fit is None:
        return ()
    if process.verdict == "distinct":
        return (_gain(process, fit), _best(record, process, fit))
    return (_best(record, process, fit), _reach(process), _gain(process, fit))


def misfit_figures(process: OneProcess) -> str:
    """Return the numbers of that plot, for readers who do not see it.

    Parameters
    ----------
    process : OneProcess
        Of a group that was fitted.

    Returns
    -------
    str
        Chi-square with one value and with one for each site, degrees of freedom, and
        the chi-square of the dashed line. Blank without a fit.
    """
    fit = shown_fit(process)
    if fit is None:
        return ""
    text = (
        f"Chi-square with one value: {_chi2(fit.chi2_shared)} with "
        f"{fit.freedom_shared} degrees of freedom; with a value for each: "
        f"{_chi2(fit.chi2_free)} with {fit.freedom_free}"
    )
    if process.verdict == "distinct":
        return f"{text}."
    return f"{text}; dashed line at {_chi2(fit.interval_limit)}."


def _value(value: float, unit: str) -> str:
    return show_number(value, unit).replace(" ", "\u00a0")


def _best(record: AnalysisRecord, process: OneProcess, fit: GroupFit) -> str:
    count = number_in_words(len(fit.profiles.name))
    group = f"all {count}"
    if process.apart:
        group = f"the {count} without {fitted_site_names(record, process.apart)}"
    if not np.isfinite(fit.shared):
        end = _value(fit.best, process.unit)
        side = "lower" if fit.best <= fit.grid[0] else "upper"
        return (
            f"One {process.parameter} for {group} fits best at the {side} end of the "
            f"range searched, {end}."
        )
    value = _value(fit.shared, process.unit)
    return f"One {process.parameter} for {group} fits best at {value}."


def _reach(process: OneProcess) -> str:
    low, high = (_value(v, process.unit) for v in (process.low, process.high))
    known = np.isfinite(process.low), np.isfinite(process.high)
    if known == (True, True):
        return (
            f"From {low} to {high} it fits within the errors (dashed line, 95\u00a0%)."
        )
    if known == (False, True):
        return f"Up to {high} it fits within the errors (dashed line, 95\u00a0%)."
    if known == (True, False):
        return f"From {low} on it fits within the errors (dashed line, 95\u00a0%)."
    return "Any value searched fits within the errors (dashed line, 95\u00a0%)."


def _gain(process: OneProcess, fit: GroupFit) -> str:
    """Return what a value for each site gains, beside the verdict of the test."""
    numbers = f"χ² {_chi2(fit.chi2_free)} against {_chi2(fit.chi2_shared)}"
    if process.verdict == "distinct":
        return f"A value for each fits better than chance allows ({numbers})."
    if process.verdict in ("shared", "shared by a subset"):
        return f"A value for each fits no better than chance allows ({numbers})."
    return f"A value for each: {numbers}."


def _chi2(value: float) -> str:
    if value < 1000:
        return f"{value:.{2 if value < 10 else 1}f}"
    return number_in_words(round(value))
