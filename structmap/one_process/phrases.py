"""What a verdict means, in sentences."""

import numpy as np

from structmap.one_process.sharing import OneProcess

_LISTED = 8
_LIKELY = 0.2
_NOTABLE = 1.5
_PREFIXES = ((1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"), (1e-12, "p"))
_SCALED_UNITS = ("s", "M")


def show_number(value: float, unit: str) -> str:
    """Return a number with its unit, three digits and a fitting prefix.

    Parameters
    ----------
    value : float
        In the base unit.
    unit : str
        Base unit; only s and M take prefixes.

    Returns
    -------
    str
        For example ``18.5 µs``.
    """
    scale, prefixed = prefix_of(value, unit)
    return f"{value / scale:.3g} {prefixed}".strip()


def prefix_of(value: float, unit: str) -> tuple[float, str]:
    """Return the unit with the prefix that suits a value.

    Parameters
    ----------
    value : float
        In the base unit.
    unit : str
        Base unit; only s and M take prefixes.

    Returns
    -------
    scale : float
        What the value is divided by.
    unit : str
        For example ``µs``.
    """
    if unit not in _SCALED_UNITS or value == 0 or not np.isfinite(value):
        return 1.0, unit
    scale, prefix = next(
        (pair for pair in _PREFIXES if abs(value) >= pair[0]), _PREFIXES[-1]
    )
    return scale, f"{prefix}{unit}"


def show_interval(result: OneProcess) -> str:
    """Return the shared value with its interval, open ends in words.

    Parameters
    ----------
    result : OneProcess
        Of a group.

    Returns
    -------
    str
        For example ``tau 18.5 µs (16.9 µs to 20.4 µs)`` or ``tau below 800 ns``.
    """
    name, unit = result.parameter, result.unit
    low, high = (show_number(end, unit) for end in (result.low, result.high))
    low_known, high_known = np.isfinite(result.low), np.isfinite(result.high)
    if not low_known and not high_known:
        return f"{name} not bounded by these data"
    if not low_known:
        return f"{name} below {high}"
    if not high_known:
        return f"{name} above {low}"
    if not np.isfinite(result.value):
        return f"{name} between {low} and {high}"
    return f"{name} {show_number(result.value, unit)} ({low} to {high})"


def plain_words(result: OneProcess) -> tuple[str, ...]:
    """Return what the verdict says and what it does not, in sentences.

    Parameters
    ----------
    result : OneProcess
        Of a group.

    Returns
    -------
    tuple of str
        The verdict first, then its limits.
    """
    sentences = [_verdict(result)]
    if result.verdict in ("shared", "shared by a subset"):
        sentences.append(_resolution(result))
    if result.verdict == "shared" and result.reference_p > _LIKELY:
        sentences.append("But so would most sets of this size.")
    if result.flat:
        sentences.append(
            f"{len(result.flat)} of {len(result.sites)} profiles are flat and carry no "
            "information: outside the window of this experiment, which is not rest."
        )
    if result.too_short and result.fit:
        several = len(result.too_short) > 1
        has, is_ = ("sites have", "are") if several else ("site has", "is")
        more = ", …" if len(result.too_short) > _LISTED else ""
        sentences.append(
            f"{len(result.too_short)} {has} too few points and {is_} left out: "
            f"{', '.join(result.too_short[:_LISTED])}{more}."
        )
    if result.error_note:
        sentences.append(f"{result.error_note[0].upper()}{result.error_note[1:]}.")
    if result.worst:
        sentences.append(f"Far off the fit: {'; '.join(result.worst)}.")
    sentences.extend(result.notes)
    if result.descriptive:
        sentences.append(
            "The group was formed on the same profiles, so this describes it and "
            "confirms nothing; form it on the structure or on another observable."
        )
    return tuple(sentences)


def _verdict(result: OneProcess) -> str:
    n_used = len(result.fit.profiles.name) if result.fit else 0
    if result.verdict == "shared":
        return f"One value explains all {n_used} sites: {show_interval(result)}."
    if result.verdict == "distinct":
        return (
            f"One value does not explain these {n_used} sites "
            f"(chance {result.p_distinct:.2g}){_scatter(result)}."
        )
    if result.verdict == "shared by a subset":
        apart = ", ".join(result.apart)
        return f"One value explains all but {apart}: {show_interval(result)}."
    return f"These data cannot tell ({result.reason}); {show_interval(result)}."


def _scatter(result: OneProcess) -> str:
    """Return how much wider than stated the values scatter about one value."""
    fit = result.fit
    if fit is None or fit.freedom_shared < 1:
        return ""
    reduced = fit.chi2_shared / fit.freedom_shared
    if reduced < _NOTABLE:
        return ""
    return (
        f": with one value they scatter {np.sqrt(reduced):.1f} times as widely as "
        f"their stated errors allow (reduced chi-square {reduced:.1f})"
    )


def _resolution(result: OneProcess) -> str:
    found = result.detectable
    if found is None or not np.isfinite(found.split):
        return "How different sites could be and still pass is not known."
    linear = result.fit is not None and result.fit.model.shared.scale == "linear"
    if linear:
        size = show_number(found.split, result.unit)
        return f"Sites differing by less than {size} could not be told apart."
    text = f"Sites differing by less than a factor {found.split:.2f}"
    sides = (("above", found.one_up), ("below", found.one_down))
    shown = [
        f"a single site {side} the others is seen beyond a factor {ratio:.2f}"
        if np.isfinite(ratio)
        else f"a single site {side} the others would not be seen"
        for side, ratio in sides
    ]
    return f"{text} could not be told apart; {', '.join(shown)}."
