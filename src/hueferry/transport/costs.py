"""Costs between two sets of colours."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Costs


def squared_distances(source: Colours, target: Colours) -> Costs:
    """Return the (n, m) squared Euclidean distances (Kantorovich's usual cost), >= 0."""
    norms = (source**2).sum(axis=1)[:, None] + (target**2).sum(axis=1)[None, :]
    return np.asarray(np.maximum(norms - 2 * source @ target.T, 0.0))


def distances(source: Colours, target: Colours) -> Costs:
    """Return the (n, m) Euclidean distances (Monge's cost)."""
    return np.asarray(np.sqrt(squared_distances(source, target)))


def weighted_squared_distances(source: Colours, target: Colours, metric: NDArray[np.float64]) -> Costs:
    """Return the (n, m) squared distances (x − y)ᵀ M (x − y) under a symmetric positive definite (d, d) metric."""
    root = np.linalg.cholesky(metric)
    return squared_distances(source @ root, target @ root)
