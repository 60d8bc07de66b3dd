"""Variable projection: baselines and amplitudes solved inside, on a grid of nodes.

For a kernel f at one node, the best baseline and amplitude of a site are those of a
weighted straight line of the values over f. With f centred and scaled to length 1, the
misfit is the squared length of the centred values less the square of one scalar
product, so that a grid of nodes and many replicates cost one matrix product a site.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from structmap.one_process.model import FloatArray, Model

_NO_SHAPE = 1e-12
"""A kernel whose centred squared length is below this share tells nothing."""


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Basis:
    """Kernels of the sites at some nodes, centred and scaled.

    Attributes
    ----------
    root_weight : ndarray, shape (n_sites, n_points)
        One over the error, 0 where missing.
    block_weight : ndarray, shape (n_blocks, n_sites, n_points)
        The same, 0 outside each block of points with a baseline in common.
    centred, raw : ndarray, shape (n_sites, n_nodes, n_points)
        Weighted kernels of length 1, with and without their mean taken off; zeros
        where the kernel has no shape.
    centred_length, raw_length : ndarray, shape (n_sites, n_nodes)
        Lengths taken out.
    mean : ndarray, shape (n_blocks, n_sites, n_nodes)
        Weighted mean of the kernel in each block.
    nonnegative_amplitude, nonnegative_baseline, has_baseline : bool
        What the model allows; several baselines are always free.
    """

    root_weight: NDArray[np.float64]
    block_weight: NDArray[np.float64]
    centred: NDArray[np.float64]
    raw: NDArray[np.float64]
    centred_length: NDArray[np.float64]
    raw_length: NDArray[np.float64]
    mean: NDArray[np.float64]
    nonnegative_amplitude: bool
    nonnegative_baseline: bool
    has_baseline: bool


def make_basis(
    kernel: FloatArray,
    root_weight: FloatArray,
    model: Model,
    *,
    block: NDArray[np.int64] | None = None,
) -> Basis:
    """Return the centred and scaled kernels of all sites.

    Parameters
    ----------
    kernel : ndarray, shape (n_nodes, n_points) or (n_sites, n_nodes, n_points)
        The model's function at the nodes, common to the sites or not.
    root_weight : ndarray, shape (n_sites, n_points)
        One over the error, 0 where missing.
    model : Model
        Decides about baseline and signs.
    block : ndarray of int, shape (n_points,), optional
        Points of one number have a baseline in common; the default is one block.

    Returns
    -------
    Basis
        For `node_chi2` and `solve_linear`.
    """
    weighted = kernel * root_weight[:, None, :]
    has_baseline = model.baseline != "none"
    numbers = np.zeros(1) if block is None else np.unique(block)
    inside = np.zeros(root_weight.shape[1]) if block is None else block
    parts = np.stack([root_weight * (inside == number) for number in numbers])
    mean = np.zeros((len(parts), *weighted.shape[:2]))
    centred = weighted
    for number, part in enumerate(parts if has_baseline else ()):
        total = np.maximum((part**2).sum(axis=1), np.finfo(float).tiny)
        mean[number] = (weighted * part[:, None, :]).sum(axis=2) / total[:, None]
        centred = centred - mean[number, ..., None] * part[:, None, :]
    raw_length = np.sqrt((weighted**2).sum(axis=2))
    length = np.sqrt((centred**2).sum(axis=2))
    shaped = length > np.sqrt(_NO_SHAPE) * raw_length
    return Basis(
        root_weight=root_weight,
        block_weight=parts,
        centred=_scaled(centred, length, shaped),
        raw=_scaled(weighted, raw_length, raw_length > 0),
        centred_length=np.where(shaped, length, 0.0),
        raw_length=raw_length,
        mean=mean,
        nonnegative_amplitude=model.amplitude == "nonnegative",
        nonnegative_baseline=model.baseline == "nonnegative" and len(parts) == 1,
        has_baseline=has_baseline,
    )


def node_chi2(basis: Basis, value: FloatArray) -> FloatArray:
    """Return the misfit of every site at every node, for many sets of values.

    Parameters
    ----------
    basis : Basis
        Of the sites.
    value : ndarray, shape (n_sets, n_sites, n_points)
        Values, anything finite where missing.

    Returns
    -------
    ndarray, shape (n_sites, n_nodes, n_sets)
        Chi-square with the best allowed baseline and amplitude.
    """
    data = np.moveaxis(value * basis.root_weight, 0, -1)
    total = (data**2).sum(axis=1)
    level = _levels(basis, data)
    rest = total
    for part, own in zip(basis.block_weight, level, strict=True):
        rest = rest - own**2 * (part**2).sum(axis=1)[:, None]
    along = basis.centred @ data
    if basis.nonnegative_amplitude:
        np.maximum(along, 0.0, out=along)
    chi2 = rest[:, None, :] - along**2
    if basis.nonnegative_baseline:
        _forbid_negative_baseline(basis, (data, total, level[0]), along, chi2)
    return np.asarray(np.maximum(chi2, 0.0))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LinearPart:
    """Baselines and amplitudes at one node.

    Attributes
    ----------
    baseline : ndarray of float, shape (n_sites, n_blocks)
        Of each site and block of points.
    amplitude, chi2 : ndarray of float, shape (n_sites,)
        Of each site.
    leverage : ndarray of float, shape (n_sites, n_points)
        How far each value draws its own fit, 0 to 1.
    """

    baseline: NDArray[np.float64]
    amplitude: NDArray[np.float64]
    chi2: NDArray[np.float64]
    leverage: NDArray[np.float64]


def solve_linear(basis: Basis, value: FloatArray) -> LinearPart:
    """Return baselines and amplitudes of the sites at the only node of a basis.

    Parameters
    ----------
    basis : Basis
        Of one node.
    value : ndarray, shape (n_sites, n_points)
        Values, anything finite where missing.

    Returns
    -------
    LinearPart
        With leverages of the parameters that no limit holds.
    """
    data = (value * basis.root_weight)[..., None]
    level = _levels(basis, data)[..., 0]
    along = (basis.centred @ data)[:, 0, 0]
    if basis.nonnegative_amplitude:
        along = np.maximum(along, 0.0)
    length, mean = basis.centred_length[:, 0], basis.mean[..., 0]
    amplitude = np.divide(along, length, out=np.zeros_like(along), where=length > 0)
    baseline = level - amplitude * mean if basis.has_baseline else np.zeros_like(level)
    leverage = basis.centred[:, 0] ** 2 * (amplitude != 0)[:, None]
    for part in basis.block_weight if basis.has_baseline else ():
        total = np.maximum((part**2).sum(axis=1), np.finfo(float).tiny)
        leverage = leverage + part**2 / total[:, None]
    if basis.nonnegative_baseline:
        held = (baseline[0] < 0) & (amplitude > 0)
        raw_along = np.maximum((basis.raw @ data)[:, 0, 0], 0.0)
        amplitude = np.where(held, raw_along / basis.raw_length[:, 0], amplitude)
        baseline = np.where(held, 0.0, baseline)
        leverage = np.where(held[:, None], basis.raw[:, 0] ** 2, leverage)
    chi2 = node_chi2(basis, value[None])[:, 0, 0]
    return LinearPart(
        baseline=baseline.T, amplitude=amplitude, chi2=chi2, leverage=leverage
    )


def _levels(basis: Basis, data: FloatArray) -> FloatArray:
    """Return weighted means of blocks, shape (n_blocks, n_sites, n_sets)."""
    out = np.zeros((len(basis.block_weight), data.shape[0], data.shape[2]))
    for number, part in enumerate(basis.block_weight if basis.has_baseline else ()):
        total = np.maximum((part**2).sum(axis=1), np.finfo(float).tiny)
        out[number] = (part[..., None] * data).sum(axis=1) / total[:, None]
    return out


def _forbid_negative_baseline(
    basis: Basis,
    data: tuple[FloatArray, FloatArray, FloatArray],
    along: FloatArray,
    chi2: FloatArray,
) -> None:
    """Set the misfit right, in place, where the best baseline would be below 0."""
    values, total, level = data
    ratio = np.divide(
        basis.mean[0],
        basis.centred_length,
        out=np.zeros_like(basis.mean[0]),
        where=basis.centred_length > 0,
    )
    # Only nodes where the largest amplitude would pull the lowest level below 0.
    doubtful = ratio * along.max(axis=2) > level.min(axis=1)[:, None]
    for site in np.nonzero(doubtful.any(axis=1))[0]:
        nodes = np.nonzero(doubtful[site])[0]
        size = along[site, nodes]
        held = (level[site] < ratio[site, nodes, None] * size) & (size > 0)
        if held.any():
            through_zero = np.maximum(basis.raw[site, nodes] @ values[site], 0.0)
            chi2[site, nodes] = np.where(
                held, total[site] - through_zero**2, chi2[site, nodes]
            )


def _scaled(
    vectors: FloatArray, length: FloatArray, where: NDArray[np.bool_]
) -> FloatArray:
    out = np.zeros_like(vectors)
    np.divide(vectors, length[..., None], out=out, where=where[..., None])
    return out
