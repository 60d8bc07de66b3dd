"""One-dimensional searches that start from the nodes of a grid."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.model import FloatArray, Parameter

_CLOSE = 1e-10
_MAX_STEPS = 60
_SMALL_STEP = 1e-3
_GOLDEN = (np.sqrt(5) - 1) / 2
_GOLDEN_STEPS = 26


def to_axis(value: float | FloatArray, parameter: Parameter) -> FloatArray:
    """Return the value on the axis on which the grid is even.

    Parameters
    ----------
    value : float or ndarray
        Values of the parameter.
    parameter : Parameter
        Its scale decides.

    Returns
    -------
    ndarray of float
        The logarithm, or the value itself.
    """
    number = np.asarray(value, dtype=np.float64)
    return np.log(number) if parameter.scale == "log" else number


def from_axis(position: float | FloatArray, parameter: Parameter) -> FloatArray:
    """Undo `to_axis`.

    Parameters
    ----------
    position : float or ndarray
        On the axis.
    parameter : Parameter
        Its scale decides.

    Returns
    -------
    ndarray of float
        Values of the parameter.
    """
    number = np.asarray(position, dtype=np.float64)
    return np.exp(number) if parameter.scale == "log" else number


def parabola_minimum(table: FloatArray) -> FloatArray:
    """Return the lowest value along the second last axis, between nodes too.

    Parameters
    ----------
    table : ndarray, shape (..., n_nodes, n_sets)
        Values at even nodes; below three of them none is sought between.

    Returns
    -------
    ndarray, shape (..., n_sets)
        Lowest point of the parabola through the lowest node and its neighbours; on
        the first and last node the value there.
    """
    n_nodes = table.shape[-2]
    if n_nodes < 3:
        return np.asarray(table.min(axis=-2))
    lowest = np.expand_dims(table.argmin(axis=-2), -2)
    inner = np.clip(lowest, 1, n_nodes - 2)
    left, centre, right = (
        np.take_along_axis(table, inner + shift, axis=-2) for shift in (-1, 0, 1)
    )
    bend = left - 2 * centre + right
    drop = np.divide(
        (left - right) ** 2, 8 * bend, out=np.zeros_like(bend), where=bend > 0
    )
    at_node = np.take_along_axis(table, lowest, axis=-2)
    found = np.where(lowest == inner, centre - drop, at_node)
    return np.asarray(np.maximum(found, 0.0)[..., 0, :])


def refine_minima(
    misfits: Callable[[FloatArray], FloatArray], nodes: FloatArray, table: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return where several functions are lowest near the lowest of their nodes.

    Parameters
    ----------
    misfits : callable
        Takes a position for each function, shape (k,), and returns their values.
    nodes : ndarray, shape (n_nodes,)
        Evenly spaced and rising.
    table : ndarray, shape (k, n_nodes)
        The functions at the nodes.

    Returns
    -------
    position : ndarray, shape (k,)
        On the first and last node that node itself.
    value : ndarray, shape (k,)
        The functions there.
    """
    row = np.arange(len(table))
    lowest = table.argmin(axis=1)
    best, value = nodes[lowest], table[row, lowest]
    inner = (lowest > 0) & (lowest < len(nodes) - 1)
    if not inner.any():
        return best, value
    width = nodes[1] - nodes[0]
    low, high = best - width, best + width
    left, right = high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
    at_left, at_right = misfits(left), misfits(right)
    for _ in range(_GOLDEN_STEPS):
        down = at_left < at_right
        low, high = np.where(down, low, left), np.where(down, right, high)
        fresh = np.where(
            down, high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
        )
        found = misfits(fresh)
        left, right = np.where(down, fresh, right), np.where(down, left, fresh)
        at_left, at_right = (
            np.where(down, found, at_right),
            np.where(down, at_left, found),
        )
    position = np.where(at_left < at_right, left, right)
    step = _SMALL_STEP * width
    sides = misfits(position - step), misfits(position), misfits(position + step)
    polished = position + step * _vertex(*sides)
    at_polished = misfits(polished)
    position = np.where(at_polished < sides[1], polished, position)
    chi2 = np.minimum(at_polished, sides[1])
    better = inner & (chi2 < value)
    return np.where(better, position, best), np.where(better, chi2, value)


def find_intervals(
    misfits: Callable[[FloatArray], FloatArray],
    nodes: FloatArray,
    table: FloatArray,
    *,
    best: FloatArray,
    limit: FloatArray,
    close: float = _CLOSE,
) -> FloatArray:
    """Return the outermost crossings of a limit on both sides of each minimum.

    Parameters
    ----------
    misfits : callable
        Takes a position for each function, shape (k,), and returns their values.
    nodes : ndarray, shape (n_nodes,)
        Rising.
    table : ndarray, shape (k, n_nodes)
        The functions at the nodes.
    best, limit : ndarray, shape (k,)
        Where each is lowest, and a limit above the lowest value.
    close : float, optional
        How near to the limit, as a share of it, a crossing must lie.

    Returns
    -------
    ndarray, shape (k, 2)
        Low and high position; NaN where the function stays below the limit up to the
        end of the nodes.
    """
    inside = table <= limit[:, None]
    found = np.full((len(best), 2), np.nan)
    for column, ends in enumerate((_low_ends, _high_ends)):
        near, far, bounded = ends(nodes, inside, best)
        if bounded.any():
            crossing = _cross(misfits, limit, near=near, far=far, close=close)
            found[bounded, column] = crossing[bounded]
    return found


def _low_ends(
    nodes: FloatArray, inside: NDArray[np.bool_], best: FloatArray
) -> tuple[FloatArray, FloatArray, NDArray[np.bool_]]:
    """Return, below each minimum, the outermost place inside and the node beyond it."""
    first = np.where(inside.any(axis=1), inside.argmax(axis=1), len(nodes) - 1)
    near = np.minimum(nodes[first], best)
    beyond = np.searchsorted(nodes, near) - 1
    bounded = beyond >= 0
    return near, np.where(bounded, nodes[np.maximum(beyond, 0)], near), bounded


def _high_ends(
    nodes: FloatArray, inside: NDArray[np.bool_], best: FloatArray
) -> tuple[FloatArray, FloatArray, NDArray[np.bool_]]:
    near, far, bounded = _low_ends(-nodes[::-1], inside[:, ::-1], -best)
    return -near, -far, bounded


def _vertex(left: FloatArray, centre: FloatArray, right: FloatArray) -> FloatArray:
    """Return where a parabola is lowest, in steps from the centre."""
    bend = left - 2 * centre + right
    move = np.divide(left - right, 2 * bend, out=np.zeros_like(bend), where=bend > 0)
    return np.clip(move, -1.0, 1.0)


def _cross(
    misfits: Callable[[FloatArray], FloatArray],
    limit: FloatArray,
    *,
    near: FloatArray,
    far: FloatArray,
    close: float,
) -> FloatArray:
    """Return where the functions cross their limits, by regula falsi (Illinois)."""
    a, b = near.copy(), far.copy()
    at_a, at_b = misfits(a) - limit, misfits(b) - limit
    middle = (a + b) / 2
    for _ in range(_MAX_STEPS):
        gap = at_b - at_a
        share = np.divide(-at_a, gap, out=np.full_like(gap, 0.5), where=gap != 0)
        middle = a + np.clip(share, 0.0, 1.0) * (b - a)
        value = misfits(middle) - limit
        outside = value > 0
        at_a = np.where(outside, at_a / 2, at_a)
        at_b = np.where(outside, at_b, at_b / 2)
        a, at_a = np.where(outside, a, middle), np.where(outside, at_a, value)
        b, at_b = np.where(outside, middle, b), np.where(outside, value, at_b)
        done = (np.abs(value) <= close * np.maximum(limit, 1)) | (
            np.abs(b - a) <= close
        )
        if done.all():
            break
    return middle
