"""Groups of a series: pictures that links join, directly or by way of others."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from hueferry.series.candidates import Pair
from hueferry.series.views import View

Labels = NDArray[np.int64]

LEAST_DISTANCE = 0.05
"""Distance of palettes, in Oklab, below which nothing stands apart."""


def components(count: int, pairs: Iterable[Pair]) -> Labels:
    """Return the (count,) group of each picture; groups are numbered by their first picture."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    ends = np.array(list(pairs), dtype=np.int64).reshape(-1, 2)
    graph = coo_array((np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(count, count))
    labels = np.asarray(connected_components(graph, directed=False)[1], dtype=np.int64)
    first = np.unique(labels, return_index=True)[1]
    rank = np.argsort(np.argsort(first))
    return np.asarray(rank[labels], dtype=np.int64)


def medoid(views: Sequence[View], members: NDArray[np.int64]) -> int:
    """Return the member whose palette is nearest to the middle of the group's palettes."""
    keys = np.stack([views[index].palette for index in members])
    distances = np.linalg.norm(keys - np.median(keys, axis=0), axis=1)
    return int(members[int(np.argmin(distances))])


def remoteness(views: Sequence[View]) -> NDArray[np.float64]:
    """Return how far the palette of each picture lies from the middle of the series, in robust deviations.

    The deviation is 1.4826 times the median distance, and never less than `LEAST_DISTANCE`.
    """
    keys = np.stack([view.palette for view in views])
    distances = np.linalg.norm(keys - np.median(keys, axis=0), axis=1)
    return np.asarray(distances / max(1.4826 * float(np.median(distances)), LEAST_DISTANCE))
