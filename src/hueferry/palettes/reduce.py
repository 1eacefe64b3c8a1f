"""From exact counts to a palette of few weighted colours."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Colours, Weights
from hueferry.colour.spaces import xyz_to_oklab
from hueferry.errors import InputError
from hueferry.palettes.histogram import CELL_BITS, Counts, Histogram
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding

Labels = NDArray[np.int64]


def reduce(histogram: Histogram, encoding: Encoding, *, size: int = 1024) -> Palette:
    """Reduce counts to a palette of at most `size` colours in Oklab; deterministic.

    Pixels that are fully clipped are left out, for they do not say what colour was there; only where nothing else
    is left do they make the palette.

    Args:
        histogram: exact counts of a picture's codes.
        encoding: how those codes stand for colour.
        size: largest number of colours; >= 1.

    Returns:
        Weighted colours. `spread` is the root mean square distance between the cells and the colours that stand
        for them.

    Raises:
        InputError: nothing was counted, or `size` is not positive.

    References:
        Wu (1991), Efficient statistical computations for optimal color quantization (variance-minimising splits);
        Wan, Prusinkiewicz & Wong (1990), Variance-based color image quantization.
    """
    if size < 1:
        raise InputError(f"a palette of {size} colours holds nothing; ask for at least 1")
    if histogram.pixels == 0:
        return _clipped_palette(histogram, encoding)
    codes, counts = _coarse(histogram, bits=6)
    colours = xyz_to_oklab(encoding.to_xyz(codes))
    weights = counts / counts.sum()
    labels = _split(colours, weights, size)
    return _gather(colours, weights, labels, histogram.pixels)


def _clipped_palette(histogram: Histogram, encoding: Encoding) -> Palette:
    counts = np.array([histogram.black, histogram.white], dtype=np.int64)
    if not counts.any():
        raise InputError("no pixel was counted; give a mask that leaves some, or a picture with finite pixels")
    codes = np.array([[0.0] * 3, [1.0] * 3])[counts > 0]
    kept = counts[counts > 0]
    return Palette(xyz_to_oklab(encoding.to_xyz(codes)), kept / kept.sum(), 0.0, int(kept.sum()))


def _coarse(histogram: Histogram, *, bits: int) -> tuple[Codes, Counts]:
    """Join the cells into 2**bits a channel; the mean code of each is kept."""
    drop = CELL_BITS - bits
    fine = histogram.codes()
    axes = np.unravel_index(histogram.cells, (1 << CELL_BITS,) * 3)
    key = (axes[0] >> drop << 2 * bits) | (axes[1] >> drop << bits) | (axes[2] >> drop)
    held = np.bincount(key, weights=histogram.counts, minlength=1 << 3 * bits)
    occupied = np.flatnonzero(held)
    sums = [np.bincount(key, weights=histogram.counts * fine[:, c], minlength=1 << 3 * bits) for c in range(3)]
    codes = np.stack([total[occupied] / held[occupied] for total in sums], axis=1)
    return codes, held[occupied].astype(np.int64)


def _split(colours: Colours, weights: Weights, size: int) -> Labels:
    """Label colours by groups made by cutting the worst groups across their longest axis, until `size` are made."""
    labels = np.zeros(len(colours), dtype=np.int64)
    groups = 1
    while groups < size:
        mean, covariance, held = _moments(colours, weights, labels, groups)
        values, vectors = np.linalg.eigh(covariance)
        error = held * values.sum(axis=1)
        worst = np.flatnonzero(error > 1e-14)
        if worst.size == 0:
            break
        room = min(size - groups, max(1, (worst.size + 1) // 2))
        chosen = worst[np.argsort(-error[worst], kind="stable")[:room]]
        axis = np.zeros((groups, 3))
        axis[chosen] = vectors[chosen, :, 2]
        child = np.full(groups, -1, dtype=np.int64)
        child[chosen] = groups + np.arange(chosen.size)
        side = np.einsum("ij,ij->i", colours - mean[labels], axis[labels]) > 0
        labels = np.where(side & (child[labels] >= 0), child[labels], labels)
        groups += chosen.size
    return np.unique(labels, return_inverse=True)[1]


def _moments(
    colours: Colours, weights: Weights, labels: Labels, groups: int
) -> tuple[NDArray[np.float64], NDArray[np.float64], Weights]:
    """Return means (groups, 3), covariances (groups, 3, 3) and weights (groups,) of labelled colours."""
    held = np.bincount(labels, weights=weights, minlength=groups).astype(np.float64)
    safe = np.maximum(held, np.finfo(float).tiny)
    mean = np.stack([np.bincount(labels, weights * colours[:, c], groups) / safe for c in range(3)], axis=1)
    centred = colours - mean[labels]
    covariance = np.zeros((groups, 3, 3))
    for i in range(3):
        for j in range(i, 3):
            moment = np.bincount(labels, weights * centred[:, i] * centred[:, j], groups) / safe
            covariance[:, i, j] = covariance[:, j, i] = moment
    return mean, covariance, held


def _gather(colours: Colours, weights: Weights, labels: Labels, pixels: int) -> Palette:
    groups = int(labels.max()) + 1
    mean, covariance, held = _moments(colours, weights, labels, groups)
    within = float(held @ np.trace(covariance, axis1=1, axis2=2))
    return Palette(mean, held / held.sum(), float(np.sqrt(max(within, 0.0))), pixels)
