"""What counting leaves: how many pixels of a picture lie in each small cell of its code cube."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.errors import InputError
from hueferry.palettes.cells import Cells

Counts = NDArray[np.int64]

_APART = ("masked", "white", "black", "not_finite", "beyond")


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
        layout: how a channel is cut into cells.
        cells: (m,) numbers of the occupied cells, ascending: (red · side + green) · side + blue.
        counts: (m,) pixels in each, >= 1.
        marginals: (3, levels) pixels with each code, by channel; float pictures count 0 … 1 in 65,535 steps.
        masked: pixels left out by a mask or by an alpha of zero.
        white: pixels at the top code in every channel, counted here alone.
        black: pixels at code zero in every channel, counted here alone.
        not_finite: float pixels with a channel that is NaN or infinite, counted here alone.
        beyond: pixels with a channel outside the code range; counted at the range's edge.
    """

    layout: Cells
    cells: Counts = attrs.field(converter=whole)
    counts: Counts = attrs.field(converter=whole)
    marginals: Counts = attrs.field(converter=whole)
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
        is the scatter inside one cell, which is two codes wide at 8 bits.
        """
        starts = self.layout.starts
        held = np.add.reduceat(self.marginals, starts, axis=1)
        total = np.add.reduceat(self.marginals * np.arange(self.layout.levels), starts, axis=1)
        means = total / np.maximum(held, 1) / (self.layout.levels - 1)
        axes = self.layout.axes(self.cells)
        return np.stack([means[channel][axes[channel]] for channel in range(3)], axis=1)

    def merge(self, other: Histogram) -> Histogram:
        """Add the pixels of another picture or window; exact, commutative and associative.

        Raises:
            InputError: the two were counted in different cells.
        """
        if self.layout != other.layout:
            raise InputError(
                f"counts at {self.layout.bits} bits ({self.layout.spacing.value}) and {other.layout.bits} bits "
                f"({other.layout.spacing.value}) do not add up; reduce each to a palette instead"
            )
        cells, place = np.unique(np.concatenate([self.cells, other.cells]), return_inverse=True)
        counts = np.zeros(len(cells), np.int64)
        np.add.at(counts, place, np.concatenate([self.counts, other.counts]))
        apart = {name: getattr(self, name) + getattr(other, name) for name in _APART}
        return Histogram(self.layout, cells, counts, self.marginals + other.marginals, **apart)
