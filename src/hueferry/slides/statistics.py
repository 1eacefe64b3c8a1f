"""What two slides are compared by: quantiles of density along fixed directions, and how content makes them vary."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours

Statistics = NDArray[np.float64]

LEVELS = (0.05, 0.2, 0.4, 0.6, 0.8, 0.9, 0.97, 0.99)
"""Quantiles that are read along each direction."""

_ROOT2, _ROOT3 = np.sqrt(2.0), np.sqrt(3.0)
DIRECTIONS = np.array(
    [
        [1, 0, 0],
        [0, 1, 0],
        [0, 0, 1],
        [1 / _ROOT3, 1 / _ROOT3, 1 / _ROOT3],
        [1 / _ROOT2, -1 / _ROOT2, 0],
        [0, 1 / _ROOT2, -1 / _ROOT2],
        [1 / _ROOT2, 0, -1 / _ROOT2],
    ]
)
"""(7, 3): the channels, their sum, and their differences."""

_FEWEST = 120
_GROUNDS = 0.008
"""Density: error of a quantile that comes from the scanner and not from content."""


def statistics(density: Colours) -> Statistics:
    """Return the quantiles of (n, 3) densities along all directions, one after the other."""
    projected = np.sort(density @ DIRECTIONS.T, axis=0)
    places = np.array(LEVELS) * (len(density) - 1)
    below = places.astype(np.int64)
    above = np.minimum(below + 1, len(density) - 1)
    part = (places - below)[:, None]
    return np.asarray((projected[below] * (1 - part) + projected[above] * part).T.ravel())


def content_covariance(density: Colours, blocks: NDArray[np.int64]) -> tuple[NDArray[np.float64], int]:
    """Return how the statistics vary between blocks of one slide, where stain and light are the same; and how many."""
    groups = [density[blocks == block] for block in np.unique(blocks)]
    rows = np.array([statistics(group) for group in groups if len(group) >= _FEWEST])
    if len(rows) < 3:
        return np.eye(DIRECTIONS.shape[0] * len(LEVELS)) * 0.1**2, 1
    return np.asarray(np.cov(rows, rowvar=False)), len(rows)


def error_covariance(
    first: tuple[Colours, NDArray[np.int64]], second: tuple[Colours, NDArray[np.int64]], *, caution: float
) -> NDArray[np.float64]:
    """Return the covariance that content alone gives the difference of two slides' statistics.

    Args:
        first: (n, 3) densities and (n,) blocks of one slide.
        second: the same of the other.
        caution: what the content covariance counts for; neighbouring blocks are alike, and slides less so.
    """
    one, n = content_covariance(*first)
    two, m = content_covariance(*second)
    content = caution * (one / n + two / m)
    # Few blocks leave most directions without variation; part of it is given back to each statistic alone.
    return np.asarray(0.85 * content + np.diag(0.15 * np.diag(content) + _GROUNDS**2))
