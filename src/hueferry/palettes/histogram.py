"""What counting leaves: how many pixels of a picture lie in each small cell of its code cube."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.errors import InputError

Counts = NDArray[np.int64]

CELL_BITS = 7
"""Each channel is cut into 2**7 cells: two codes wide at 8 bits, 512 wide at 16."""


def whole(array: object) -> Counts:
    """Make a private int64 copy that nobody can write to."""
    copy = np.array(array, dtype=np.int64, copy=True, order="C")
    copy.flags.writeable = False
    return copy


@attrs.frozen(eq=False)
class Histogram:
    """Every counted pixel of one picture, or of several in the same encoding, as whole numbers.

    Two exact counts describe the pixels: how many lie in each cell of the code cube, and, channel by channel, how
    many have each code. Being integers they add up to the same numbers in any order, window size and thread.

    Attributes:
        cells: (m,) numbers of the occupied cells, ascending: (red << 14) | (green << 7) | blue.
        counts: (m,) pixels in each, >= 1.
        marginals: (3, levels) pixels with each code, by channel; levels is 2**bits, and 65,536 for float pictures.
        bits: significant bits a channel; 16 for float pictures, whose 0 … 1 is counted in 65,535 steps.
        masked: pixels left out by a mask or by an alpha of zero.
        white: pixels at the top code in every channel, counted here alone.
        black: pixels at code zero in every channel, counted here alone.
        not_finite: float pixels with a channel that is NaN or infinite, counted here alone.
        beyond: pixels with a channel outside the code range; counted at the range's edge.
    """

    cells: Counts = attrs.field(converter=whole)
    counts: Counts = attrs.field(converter=whole)
    marginals: Counts = attrs.field(converter=whole)
    bits: int
    masked: int = 0
    white: int = 0
    black: int = 0
    not_finite: int = 0
    beyond: int = 0

    @property
    def pixels(self) -> int:
        """How many pixels lie in the cells: all but masked, white, black and not finite ones."""
        return int(self.counts.sum())

    def codes(self) -> Codes:
        """Return the (m, 3) codes, 0 … 1, that stand for the occupied cells.

        In each channel a cell stands at the mean of the picture's own codes within its bounds, taken from the
        marginals. The weighted mean over all cells is therefore the mean of all pixels exactly, and what is lost
        is at most the scatter inside one cell: below one code in 255.
        """
        centres = self._channel_means()
        axes = np.unravel_index(self.cells, (1 << CELL_BITS,) * 3)
        return np.stack([centres[channel][axes[channel]] for channel in range(3)], axis=1)

    def _channel_means(self) -> NDArray[np.float64]:
        levels = self.marginals.shape[1]
        by_cell = self.marginals.reshape(3, 1 << CELL_BITS, -1)
        code = np.arange(levels, dtype=np.int64).reshape(1 << CELL_BITS, -1)
        held = by_cell.sum(axis=2)
        return np.asarray((by_cell * code).sum(axis=2) / np.maximum(held, 1) / (levels - 1))

    def merge(self, other: Histogram) -> Histogram:
        """Add the pixels of another picture or window; exact, commutative and associative.

        Raises:
            InputError: the two were counted at different depths.
        """
        if self.bits != other.bits:
            raise InputError(
                f"counts at {self.bits} and {other.bits} bits do not add up; reduce each to a palette instead"
            )
        cells, place = np.unique(np.concatenate([self.cells, other.cells]), return_inverse=True)
        counts = np.zeros(len(cells), np.int64)
        np.add.at(counts, place, np.concatenate([self.counts, other.counts]))
        apart = {
            name: getattr(self, name) + getattr(other, name)
            for name in ("masked", "white", "black", "not_finite", "beyond")
        }
        return Histogram(cells, counts, self.marginals + other.marginals, self.bits, **apart)
