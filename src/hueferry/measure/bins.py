"""Two clouds of colours as histograms over the same bins."""

from __future__ import annotations

import numpy as np

from hueferry.arrays import Weights
from hueferry.measure.cloud import LabCloud

BIN_WIDTH = 10.0
"""Edge of a bin in CIELAB: wide enough that two takes of one scene share their bins, narrow enough to part hues."""


def shared_histograms(first: LabCloud, second: LabCloud, *, width: float = BIN_WIDTH) -> tuple[Weights, Weights]:
    """Return the shares of both clouds in cubes of CIELAB, over the bins that at least one of them occupies.

    Bins are centred on multiples of `width`, so that neutrals do not lie on an edge.

    Args:
        first: n colours.
        second: m colours.
        width: edge of a bin, ΔE*ab; > 0.

    Returns:
        Two (k,) arrays that each sum to 1.
    """
    bins = np.rint(np.concatenate([first.colours, second.colours]) / width).astype(np.int64)
    _, place = np.unique(bins, axis=0, return_inverse=True)
    place = place.reshape(-1)
    size = int(place.max()) + 1
    parts = place[: len(first.weights)], place[len(first.weights) :]
    p, q = (np.bincount(part, cloud.weights, size) for part, cloud in zip(parts, (first, second), strict=True))
    return p / p.sum(), q / q.sum()
