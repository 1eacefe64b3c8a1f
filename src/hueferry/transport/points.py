"""Entropic transport between clouds too large for a matrix of costs: memory grows with the points alone.

The cost is the squared Euclidean distance, worked out block by block each time it is needed.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights
from hueferry.errors import InputError, NotConverged
from hueferry.transport.entropic import Potential, Potentials

_BLOCK_CELLS = 1 << 21
"""Cells of the cost matrix in memory at a time: 8 MB of float32."""

_SHRINK = 0.25


def potentials_between(
    source: Colours,
    source_weights: Weights,
    target: Colours,
    target_weights: Weights,
    *,
    epsilon: float,
    tolerance: float = 1e-3,
    iterations: int = 2_000,
) -> Potentials:
    """Find entropic potentials between two clouds for the squared distance, in O(n + m) memory and in the log domain.

    Args:
        source: (n, d).
        source_weights: (n,) shares > 0 that sum to 1.
        target: (m, d).
        target_weights: (m,) shares > 0 that sum to 1.
        epsilon: blur, in squared units of the points; > 0.
        tolerance: largest misplaced mass accepted, as a share of 1.
        iterations: at most, over all ε.

    Raises:
        InputError: weights are not positive, or the blur is not.
        NotConverged: the iterations left more than `tolerance` misplaced.

    References:
        Peyré & Cuturi (2019), Computational Optimal Transport, section 4.4 (log domain); Feydy (2020), Geometric data
        analysis, beyond convolutions, section 3.2 (sums by blocks, ε-scaling).
    """
    if not epsilon > 0 or not ((source_weights > 0).all() and (target_weights > 0).all()):
        raise InputError("blur and weights must be positive; leave out colours without weight")
    if not (np.isfinite(source).all() and np.isfinite(target).all()):
        raise InputError("points must be finite")
    g = np.zeros(len(target))
    every = np.concatenate([source, target])
    level = float((np.ptp(every, axis=0) ** 2).sum()) + epsilon
    spent, misplaced = 0, np.inf
    while spent < iterations:
        level = max(level * _SHRINK, epsilon)
        f = soft_minimum_between(source, target, g, target_weights, level)
        g = soft_minimum_between(target, source, f, source_weights, level)
        spent += 1
        if level > epsilon:
            continue
        # Columns are exact after this half-step, so the rows alone tell how far off we are.
        again = soft_minimum_between(source, target, g, target_weights, level)
        misplaced = float(np.abs(source_weights * np.expm1(np.clip((f - again) / level, -700, 700))).sum())
        if misplaced <= tolerance:
            return Potentials(f, g, misplaced, spent)
    raise NotConverged("entropic", spent, misplaced, tolerance)


def soft_minimum_between(
    points: Colours, others: Colours, potential: Potential, weights: Weights, epsilon: float
) -> Potential:
    """Return −ε log Σ_j w_j exp((g_j − |x_i − y_j|²) / ε) for every point i, by blocks.

    Args:
        points: (n, d) x.
        others: (m, d) y.
        potential: (m,) g.
        weights: (m,) w > 0.
        epsilon: ε > 0.
    """
    centre = others.mean(axis=0)
    y = (others - centre).astype(np.float32)
    bias = (potential / epsilon + np.log(weights) - (y.astype(np.float64) ** 2).sum(axis=1) / epsilon).astype(
        np.float32
    )
    turned = y.T * np.float32(2 / epsilon)
    result = np.empty(len(points))
    rows = max(1, _BLOCK_CELLS // len(others))
    for start in range(0, len(points), rows):
        x: NDArray[np.float64] = points[start : start + rows] - centre
        exponent = x.astype(np.float32) @ turned + bias
        peak = exponent.max(axis=1)
        np.exp(exponent - peak[:, None], out=exponent)
        sums = exponent.sum(axis=1, dtype=np.float64)
        result[start : start + rows] = (x**2).sum(axis=1) - epsilon * (peak + np.log(sums))
    return result
