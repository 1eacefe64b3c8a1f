"""Counts under way: dense, mutable, and owned by one thread.

OpenCV's histogram keeps float32, in which whole numbers are exact up to 2**24. A tally moves its counts to int64
before that many pixels have been added, so every number is that of exact arithmetic.
"""

from __future__ import annotations

import sys

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Mask, Pixels
from hueferry.palettes.cells import Cells
from hueferry.palettes.histogram import Histogram

_EXACT = 1 << 24
_BYTE = 256
_TWO_CODES_WIDE = Cells(8)


@attrs.define(eq=False)
class Tally:
    """Counts of the pixels added so far."""

    layout: Cells
    joint: NDArray[np.int64]
    recent: NDArray[np.float32]
    recent_pixels: int
    marginals: NDArray[np.int64]
    masked: int = 0
    not_finite: int = 0
    beyond: int = 0

    @classmethod
    def empty(cls, layout: Cells) -> Tally:
        """Start at zero."""
        shape = (layout.side,) * 3
        return cls(
            layout, np.zeros(0, np.int64), np.zeros(shape, np.float32), 0, np.zeros((3, layout.levels), np.int64)
        )

    def add(self, pixels: Pixels, counted: Mask | None) -> None:
        """Count pixels in native depth; fewer than 2**24 at a time.

        Args:
            pixels: (height, width, 1 … 4); a last channel of two or four is alpha.
            counted: (height, width), true where a pixel counts; None counts all.
        """
        channels = pixels.shape[2]
        if channels in (2, 4):
            opaque = np.asarray(pixels[:, :, -1] > 0)
            counted = opaque if counted is None else counted & opaque
            pixels = pixels[:, :, : channels - 1]
        if counted is not None:
            self.masked += counted.size - int(np.count_nonzero(counted))
        if pixels.dtype == np.float32:
            pixels, counted = self._quantise(pixels, counted)
        self._add_codes(np.ascontiguousarray(self._within(pixels, counted)), counted)

    def absorb(self, other: Tally) -> None:
        """Add the counts of another thread."""
        self._settle()
        other._settle()
        self.joint += other.joint
        self.marginals += other.marginals
        self.masked += other.masked
        self.not_finite += other.not_finite
        self.beyond += other.beyond

    def frozen(self) -> Histogram:
        """Return the counts, with fully clipped pixels moved out of the cells."""
        dense = self.joint if self.joint.size else self.recent.reshape(-1)
        if self.joint.size:
            self._settle()
        black, white = int(dense[0]), int(dense[-1])
        marginals = self.marginals.copy()
        marginals[:, 0] -= black
        marginals[:, -1] -= white
        cells = np.flatnonzero(dense)
        cells = cells[(cells > 0) & (cells < dense.size - 1)]
        apart = (self.masked, white, black, self.not_finite, self.beyond)
        return Histogram(self.layout, cells, dense[cells].astype(np.int64), marginals, *apart)

    def _settle(self) -> None:
        if not self.joint.size:
            self.joint = np.zeros(self.layout.side**3, np.int64)
        if self.recent_pixels:
            self.joint += self.recent.reshape(-1).astype(np.int64)
            self.recent[:] = 0
            self.recent_pixels = 0

    def _quantise(self, pixels: Pixels, counted: Mask | None) -> tuple[Pixels, Mask | None]:
        """Round floats to 65,535 steps; what is not finite is counted apart, what is beyond 0 … 1 at its edge."""
        if not np.isfinite(pixels).all():
            finite = np.asarray(np.isfinite(pixels).all(axis=2), dtype=bool)
            broken = ~finite if counted is None else counted & ~finite
            self.not_finite += int(np.count_nonzero(broken))
            counted = finite if counted is None else counted & finite
            pixels = np.where(finite[:, :, None], pixels, np.float32(0))
        if pixels.min() < 0 or pixels.max() > 1:
            outside = np.asarray(((pixels < 0) | (pixels > 1)).any(axis=2), dtype=bool)
            self.beyond += int(np.count_nonzero(outside if counted is None else outside & counted))
            pixels = np.clip(pixels, 0, 1)
        return (pixels * np.float32(self.layout.levels - 1) + np.float32(0.5)).astype(np.uint16), counted

    def _within(self, codes: Pixels, counted: Mask | None) -> Pixels:
        levels = self.layout.levels
        if levels > np.iinfo(codes.dtype).max or int(codes.max()) < levels:
            return codes
        above = np.asarray((codes >= levels).any(axis=2), dtype=bool)
        self.beyond += int(np.count_nonzero(above if counted is None else above & counted))
        return np.asarray(np.minimum(codes, codes.dtype.type(levels - 1)))

    def _add_codes(self, codes: Pixels, counted: Mask | None) -> None:
        import cv2

        height, width, channels = codes.shape
        if self.recent_pixels + height * width >= _EXACT:
            self._settle()
        if channels == 1:
            codes = np.repeat(codes, 3, axis=2)
        mask = None if counted is None else np.ascontiguousarray(counted).view(np.uint8)
        numbers, span = _cell_numbers(codes, self.layout)
        sides = [self.layout.side] * 3
        joint = cv2.calcHist([numbers], [0, 1, 2], mask, sides, span * 3, self.recent, accumulate=True)
        self.recent = np.asarray(joint, dtype=np.float32)
        self.recent_pixels += height * width
        for channel in range(3):
            self.marginals[channel] += _marginal(codes, channel, mask, self.layout.levels)


def _cell_numbers(codes: Pixels, layout: Cells) -> tuple[NDArray[np.uint8], list[float]]:
    """Return 8-bit numbers and the range of them that `layout.side` equal steps cut into the cells."""
    if layout == _TWO_CODES_WIDE:
        return codes, [-1.0, 257.0]  # one code before 0 and one after 255 make the first and last cell as wide
    span = [0.0, float(layout.side)]
    if codes.dtype == np.uint8 and layout.levels == _BYTE:
        import cv2

        return np.asarray(cv2.LUT(codes, layout.of_code()), dtype=np.uint8), span
    return np.asarray(layout.of_code()[codes], dtype=np.uint8), span


def _marginal(codes: Pixels, channel: int, mask: NDArray[np.uint8] | None, levels: int) -> NDArray[np.int64]:
    """Count each code of one channel; 16-bit codes as pairs of bytes, which OpenCV counts faster than their value."""
    import cv2

    if codes.dtype == np.uint8:
        single = cv2.calcHist([codes], [channel], mask, [_BYTE], [0, _BYTE]).reshape(-1)
        return np.asarray(single[:levels].astype(np.int64))
    halves = codes.view(np.uint8).reshape(codes.shape[0], codes.shape[1], 6)
    low, high = (0, 1) if sys.byteorder == "little" else (1, 0)
    pair = cv2.calcHist(
        [halves], [2 * channel + high, 2 * channel + low], mask, [_BYTE, _BYTE], [0, _BYTE, 0, _BYTE]
    ).reshape(-1)
    return np.asarray(pair[:levels].astype(np.int64))
