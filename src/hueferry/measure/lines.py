"""Palettes on many lines at once: the sliced distance, fast enough for thousands of pairs.

A cloud projected on a direction is a distribution on a line, where the cheapest plan pairs sorted colours with sorted
colours. Averaged over directions this is the sliced distance (Rabin, Peyré, Delon & Bernot 2011; Bonneel et al. 2015).
"""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Lab, Weights
from hueferry.measure.cloud import LabCloud
from hueferry.transport.sliced import Directions, spiral_directions


@attrs.frozen(eq=False)
class SortedLines:
    """Colours projected on lines and sorted there once, for any weights.

    Attributes:
        positions: (k, n) ascending positions on each of k lines, ΔE*ab.
        order: (k, n) which colour each position belongs to.
    """

    positions: NDArray[np.float64]
    order: NDArray[np.int64]

    @classmethod
    def of(cls, colours: Lab, directions: Directions) -> SortedLines:
        """Project (n, 3) colours on the lines along (k, 3) unit vectors."""
        positions = directions @ colours.T
        order = np.argsort(positions, axis=1, kind="stable")
        return cls(np.take_along_axis(positions, order, axis=1), order)

    def ends(self, weights: Weights) -> NDArray[np.float64]:
        """Return (k, n) the share of pixels up to and with each position, ending in 1."""
        ends = np.cumsum(weights[self.order], axis=1)
        return np.asarray(ends / ends[:, -1:])

    def quantiles(self, weights: Weights, levels: int) -> NDArray[np.float64]:
        """Return a vector whose Euclidean distance to that of another cloud is their sliced distance, from below.

        On each line the quantile function is averaged over `levels` equal shares of the pixels. Averaging can only
        bring two clouds nearer, and does so by less than the scatter inside one share.

        Args:
            weights: (n,) shares, summing to 1.
            levels: shares a line.

        Returns:
            (k · levels,), scaled so that plain Euclidean distances are in ΔE*ab.
        """
        lines, ends = len(self.positions), self.ends(weights)
        integral = np.cumsum(np.diff(ends, axis=1, prepend=0.0) * self.positions, axis=1)
        start = np.zeros((lines, 1))
        apart = 2.0 * np.arange(lines)[:, None]  # lays the lines one after the other: one interpolation does them all
        at_ticks = np.interp(
            (np.arange(levels + 1) / levels + apart).ravel(),
            (np.concatenate([start, ends], axis=1) + apart).ravel(),
            np.concatenate([start, integral], axis=1).ravel(),
        ).reshape(lines, -1)
        return np.asarray(np.diff(at_ticks, axis=1) * levels / np.sqrt(levels * lines)).reshape(-1)


def squared_on_lines(first: LabCloud, second: LabCloud, directions: Directions) -> NDArray[np.float64]:
    """Return the (k,) exact squared W2 between two clouds on each of k lines (Villani 2003, theorem 2.18)."""
    lines_x, lines_y = (SortedLines.of(cloud.colours, directions) for cloud in (first, second))
    x, y = lines_x.positions, lines_y.positions
    ends_x, ends_y = lines_x.ends(first.weights), lines_y.ends(second.weights)
    ends = np.concatenate([ends_x, ends_y], axis=1)
    order = np.argsort(ends, axis=1, kind="stable")
    from_first = order < x.shape[1]
    passed = np.cumsum(from_first, axis=1)
    place_x = np.minimum(passed - from_first, x.shape[1] - 1)
    place_y = np.minimum(np.arange(order.shape[1]) - passed + from_first, y.shape[1] - 1)
    mass = np.diff(np.take_along_axis(ends, order, axis=1), axis=1, prepend=0.0)
    step = np.take_along_axis(x, place_x, axis=1) - np.take_along_axis(y, place_y, axis=1)
    return np.asarray((mass * step**2).sum(axis=1))


def sliced_distance(first: LabCloud, second: LabCloud, *, directions: int = 64) -> float:
    """Return √(mean over lines of W2²) in ΔE*ab, over evenly spread directions."""
    return float(np.sqrt(squared_on_lines(first, second, spiral_directions(directions)).mean()))
