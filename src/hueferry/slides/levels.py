"""The levels of a pyramid, made while the full size streams by."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.colour.curves import Curve
from hueferry.colour.encoding import SRGB, MatrixEncoding
from hueferry.files.look_up import average_fours, look_up_codes
from hueferry.picture import Encoding

Shape = tuple[int, int]

_STEPS = 65535
_ROWS = 16


def level_shapes(shape: Shape, *, smallest: int = 256) -> list[Shape]:
    """Return rows and columns of every level: each half the one before, rounded up, until one fits in `smallest`."""
    shapes = [shape]
    while max(shapes[-1]) > smallest:
        height, width = shapes[-1]
        shapes.append((-(-height // 2), -(-width // 2)))
    return shapes


class Halving:
    """Averages 2 × 2 pixels in linear light, by the tone curves of the slide's profile. Immutable; thread-safe.

    A profile without tone curves (a colour look-up table) is taken to have those of sRGB.
    """

    def __init__(self, encoding: Encoding, dtype: np.dtype[np.generic]) -> None:
        """Prepare for pixels of a dtype in an encoding."""
        curves = encoding.curves if isinstance(encoding, MatrixEncoding) else SRGB.curves
        self._dtype, self._curves = dtype, curves
        if dtype == np.uint8:
            codes, light = np.arange(256) / 255, np.arange(_STEPS + 1) / _STEPS
            self._decode = [np.rint(_STEPS * np.clip(c.decode(codes), 0, 1)).astype(np.uint16) for c in curves]
            self._encode = [np.rint(255 * np.clip(c.encode(light), 0, 1)).astype(np.uint8) for c in curves]
            self._alike = all(np.array_equal(table, self._decode[0]) for table in self._decode)

    def __call__(self, pixels: Pixels) -> Pixels:
        """Halve (height, width, 3) pixels; an odd last row or column is averaged with itself."""
        odd_rows, odd_columns = pixels.shape[0] % 2, pixels.shape[1] % 2
        if odd_rows or odd_columns:
            pixels = np.pad(pixels, ((0, odd_rows), (0, odd_columns), (0, 0)), mode="edge")
        if self._dtype == np.uint8 and self._alike:
            return self._halve(pixels, 0)
        halve = self._halve if self._dtype == np.uint8 else self._halve_deep
        return np.concatenate([halve(pixels[:, :, channel : channel + 1], channel) for channel in range(3)], axis=2)

    def _halve(self, pixels: Pixels, channel: int) -> Pixels:
        """Average four pixels in 16-bit light, and read the code of the mean in a table."""
        halved = np.empty((pixels.shape[0] // 2, pixels.shape[1] // 2, pixels.shape[2]), np.uint8)
        for top in range(0, pixels.shape[0], _ROWS):  # few rows at a time stay in the cache
            light = look_up_codes(pixels[top : top + _ROWS], self._decode[channel])
            # No index is out of range; "clip" spares NumPy a copy of the result.
            np.take(self._encode[channel], average_fours(light), out=halved[top // 2 : (top + _ROWS) // 2], mode="clip")
        return halved

    def _halve_deep(self, plane: Pixels, channel: int) -> Pixels:
        curve: Curve = self._curves[channel]
        top = 1.0 if self._dtype == np.float32 else float(_STEPS)
        light: NDArray[np.float64] = curve.decode(plane.astype(np.float64) / top)
        mean = (light[0::2, 0::2] + light[0::2, 1::2] + light[1::2, 0::2] + light[1::2, 1::2]) / 4
        codes = top * curve.encode(mean)
        return np.asarray(codes if self._dtype == np.float32 else np.rint(np.clip(codes, 0, top)), dtype=self._dtype)


class Cascade:
    """Takes the rows of one level in order, and hands on the bands of all smaller levels as soon as they are full.

    Bands are `rows` high at every level (the last may be lower), so what is held is one band a level.
    """

    def __init__(
        self, shapes: list[Shape], rows: int, halve: Halving, emit: Callable[[int, int, Pixels], None]
    ) -> None:
        """Prepare a cascade.

        Args:
            shapes: of every level.
            rows: height of a band, even.
            halve: averages 2 × 2 pixels.
            emit: called with level, top row, pixels of each band of level 1 and beyond, in order within a level.
        """
        self._shapes, self._rows, self._halve, self._emit = shapes, rows, halve, emit
        self._held: list[list[Pixels]] = [[] for _ in shapes]
        self._tops = [0] * len(shapes)

    def add(self, band: Pixels) -> None:
        """Take the next band of the full size."""
        self._pass_on(0, band)

    def _pass_on(self, level: int, band: Pixels) -> None:
        below = level + 1
        if below >= len(self._shapes):
            return
        self._held[below].append(self._halve(band))
        gathered = sum(part.shape[0] for part in self._held[below])
        finished = self._tops[below] + gathered >= self._shapes[below][0]
        if gathered < self._rows and not finished:
            return
        whole = np.concatenate(self._held[below])
        self._held[below] = []
        self._emit(below, self._tops[below], whole)
        self._tops[below] += whole.shape[0]
        self._pass_on(below, whole)


def tile_at(band: Pixels, left: int, side: int) -> Pixels:
    """Cut a tile out of a band of at most `side` rows; what lies beyond the slide repeats its last pixel."""
    tile = band[:, left : left + side]
    if tile.shape[:2] != (side, side):
        tile = np.pad(tile, ((0, side - tile.shape[0]), (0, side - tile.shape[1]), (0, 0)), mode="edge")
    return np.ascontiguousarray(tile)
