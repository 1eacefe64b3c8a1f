"""Counts under way: dense, mutable, and owned by one thread.

OpenCV's histogram keeps float32, in which whole numbers are exact up to 2**24. A tally moves its counts to int64
before that many pixels have been added, so every number is that of exact arithmetic.
"""

from __future__ import annotations

import sys
from functools import lru_cache

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
            counted = _but_transparent(pixels, counted)
        colour = pixels[:, :, : 3 if channels > 2 else 1]
        if counted is not None:
            self.masked += counted.size - int(np.count_nonzero(counted))
        if pixels.dtype == np.float32:
            codes, counted = self._quantise(colour, counted)
        elif self._exceeds(colour):
            codes = self._limit(colour, counted)
        else:
            codes = pixels if channels == 4 else colour  # OpenCV skips the alpha faster than a copy could
        self._add_codes(np.ascontiguousarray(codes), counted)

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
        low, high = float(pixels.min()), float(pixels.max())
        if not np.isfinite([low, high]).all():
            finite = np.asarray(np.isfinite(pixels).all(axis=2), dtype=bool)
            broken = ~finite if counted is None else counted & ~finite
            self.not_finite += int(np.count_nonzero(broken))
            counted = finite if counted is None else counted & finite
            pixels = np.where(finite[:, :, None], pixels, np.float32(0))
            low, high = float(pixels.min()), float(pixels.max())
        if low < 0 or high > 1:
            outside = np.asarray(((pixels < 0) | (pixels > 1)).any(axis=2), dtype=bool)
            self.beyond += int(np.count_nonzero(outside if counted is None else outside & counted))
            pixels = np.clip(pixels, 0, 1)
        return _to_steps(pixels, self.layout.levels), counted

    def _exceeds(self, codes: Pixels) -> bool:
        levels = self.layout.levels
        return levels <= np.iinfo(codes.dtype).max and int(codes.max()) >= levels

    def _limit(self, codes: Pixels, counted: Mask | None) -> Pixels:
        above = np.asarray((codes >= self.layout.levels).any(axis=2), dtype=bool)
        self.beyond += int(np.count_nonzero(above if counted is None else above & counted))
        return np.asarray(np.minimum(codes, codes.dtype.type(self.layout.levels - 1)))

    def _add_codes(self, codes: Pixels, counted: Mask | None) -> None:
        mask = None if counted is None else np.ascontiguousarray(counted).view(np.uint8)
        if codes.shape[2] == 1:
            self._add_gray(_marginal(codes, 0, mask, self.layout.levels))
            return
        for channel in range(3):
            self.marginals[channel] += _marginal(codes, channel, mask, self.layout.levels)
        self._add_joint(codes, mask)

    def _add_gray(self, marginal: NDArray[np.int64]) -> None:
        """Add one channel as three equal ones: what it counts lies on the cube's diagonal."""
        self.marginals += marginal
        self._settle()
        side = self.layout.side
        self.joint[np.arange(side) * (side**2 + side + 1)] += np.add.reduceat(marginal, self.layout.starts)

    def _add_joint(self, codes: Pixels, mask: NDArray[np.uint8] | None) -> None:
        import cv2

        pixels = codes.shape[0] * codes.shape[1]
        if self.recent_pixels + pixels >= _EXACT:
            self._settle()
        numbers, span = _cell_numbers(codes, self.layout)
        sides = [self.layout.side] * 3
        joint = cv2.calcHist([numbers], [0, 1, 2], mask, sides, span * 3, self.recent, accumulate=True)
        self.recent = np.asarray(joint, dtype=np.float32)
        self.recent_pixels += pixels


def _but_transparent(pixels: Pixels, counted: Mask | None) -> Mask | None:
    """Take pixels of no alpha out of a mask; None stays None where there are none."""
    alpha = pixels[:, :, -1]
    if float(alpha.min()) > 0:
        return counted
    opaque = np.asarray(alpha > 0)
    return opaque if counted is None else counted & opaque


def _to_steps(pixels: Pixels, levels: int) -> Pixels:
    """Round floats 0 … 1 to whole steps, a few rows at a time so that the work stays in cache."""
    steps = np.empty(pixels.shape, np.uint16)
    rows = max(1, (1 << 16) // pixels.shape[1])
    for top in range(0, len(pixels), rows):
        some = pixels[top : top + rows] * np.float32(levels - 1)
        some += np.float32(0.5)
        steps[top : top + rows] = some  # cut off to whole numbers, as C does
    return steps


def _cell_numbers(codes: Pixels, layout: Cells) -> tuple[NDArray[np.uint8], list[float]]:
    """Return 8-bit numbers and the range of them that `layout.side` equal steps cut into the cells."""
    if layout == _TWO_CODES_WIDE:
        return codes, [-1.0, 257.0]  # one code before 0 and one after 255 make the first and last cell as wide
    return _look_up(codes, layout.of_code()), [0.0, float(layout.side)]


def _look_up(codes: Pixels, table: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return the table's entry for every code; by OpenCV where it can, which is several times faster than NumPy."""
    import cv2

    whole = np.zeros(np.iinfo(codes.dtype).max + 1, np.uint8)
    whole[: len(table)] = table
    if codes.dtype == np.uint8 or _opencv_looks_up_16_bits():
        return np.asarray(cv2.LUT(codes, whole), dtype=np.uint8)
    return np.asarray(whole[codes], dtype=np.uint8)


@lru_cache(maxsize=1)
def _opencv_looks_up_16_bits() -> bool:
    """Whether this OpenCV has tables of 65,536 entries, which older ones lack."""
    import cv2

    table = (np.arange(1 << 16) >> 8).astype(np.uint8)
    codes = np.array([[0, 255, 256, 65535]], np.uint16)
    try:
        return np.asarray(cv2.LUT(codes, table)).reshape(-1).tolist() == [0, 0, 1, 255]
    except cv2.error:
        return False


def _marginal(codes: Pixels, channel: int, mask: NDArray[np.uint8] | None, levels: int) -> NDArray[np.int64]:
    """Count each code of one channel; 16-bit codes as pairs of bytes, which OpenCV counts faster than their value."""
    import cv2

    if codes.dtype == np.uint8:
        single = cv2.calcHist([codes], [channel], mask, [_BYTE], [0, _BYTE]).reshape(-1)
        return np.asarray(single[:levels].astype(np.int64))
    halves = codes.view(np.uint8).reshape(codes.shape[0], codes.shape[1], 2 * codes.shape[2])
    low, high = (0, 1) if sys.byteorder == "little" else (1, 0)
    pair = cv2.calcHist(
        [halves], [2 * channel + high, 2 * channel + low], mask, [_BYTE, _BYTE], [0, _BYTE, 0, _BYTE]
    ).reshape(-1)
    return np.asarray(pair[:levels].astype(np.int64))
