"""Sliced W2: transport along lines, in directions spread evenly over the sphere, with its standard error."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Weights
from hueferry.transport.one_dimensional import wasserstein_1d

Points = NDArray[np.float64]
Directions = NDArray[np.float64]

_GOLDEN = (1 + 5**0.5) / 2


@attrs.frozen
class SlicedEstimate:
    """Mean of W2² over directions.

    Attributes:
        squared: SW2², in squared units of the points.
        error: standard error of `squared` over independently turned sets of directions.
        directions: how many in all.
    """

    squared: float
    error: float
    directions: int


def spiral_directions(count: int) -> Directions:
    """Return (count, 3) unit vectors spread evenly over a half sphere: x and −x give the same line.

    References:
        Swinbank & Purser (2006), Fibonacci grids: a novel approach to global modelling.
    """
    index = np.arange(count)
    height = (index + 0.5) / count
    angle = 2 * np.pi * index / _GOLDEN
    radius = np.sqrt(1 - height**2)
    return np.stack([radius * np.cos(angle), radius * np.sin(angle), height], axis=1)


def turned_directions(count: int, dimensions: int, *, seed: int) -> Directions:
    """Return (count, dimensions) unit vectors: even angles or a spiral, turned at random; random in other spaces."""
    rng = np.random.default_rng(seed)
    if dimensions == 2:
        angle = np.pi * (np.arange(count) + rng.random()) / count
        return np.stack([np.cos(angle), np.sin(angle)], axis=1)
    if dimensions == 3:
        q, r = np.linalg.qr(rng.standard_normal((3, 3)))
        return np.asarray(spiral_directions(count) @ (q * np.sign(np.diag(r))))
    random = rng.standard_normal((count, dimensions))
    return np.asarray(random / np.linalg.norm(random, axis=1, keepdims=True))


def sliced_squared(
    source: Points,
    source_weights: Weights,
    target: Points,
    target_weights: Weights,
    *,
    directions: int = 64,
    seed: int = 0,
) -> SlicedEstimate:
    """Estimate SW2² between two weighted clouds.

    Args:
        source: (n, d).
        source_weights: (n,) shares that sum to 1.
        target: (m, d).
        target_weights: (m,) shares that sum to 1.
        directions: in all, shared among four independently turned sets.
        seed: of the turns.

    References:
        Bonneel, Rabin, Peyré & Pfister (2015), Sliced and Radon Wasserstein barycenters of measures.
    """
    sets = 4
    each = max(1, directions // sets)
    means = []
    for number in range(sets):
        lines = turned_directions(each, source.shape[1], seed=seed * sets + number)
        values = [wasserstein_1d(source @ w, source_weights, target @ w, target_weights) for w in lines]
        means.append(float(np.mean(values)))
    return SlicedEstimate(float(np.mean(means)), float(np.std(means, ddof=1) / np.sqrt(sets)), sets * each)
