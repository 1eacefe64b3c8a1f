"""Exact counting of all pixels, strip by strip.

OpenCV's histogram adds in float32, which is exact below 2**24; a strip never holds that many pixels, and strips are
added as int64. So the counts are those of one pass in exact arithmetic, whatever the strips and threads.
"""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Mask, Pixels
from hueferry.errors import InputError
from hueferry.palettes.histogram import CELL_BITS, Histogram
from hueferry.picture import PictureSource, Window, strips

__all__ = ["Histogram", "count", "count_pixels"]

_SIDE = 1 << CELL_BITS
_STRIP_PIXELS = 1 << 22  # far below 2**24, and large enough that a strip's own cells cost little beside its pixels
_FLOAT_LEVELS = 1 << 16


@attrs.define(eq=False)
class _Tally:
    """Counts of one thread, still dense."""

    cells: NDArray[np.int64]
    marginals: NDArray[np.int64]
    masked: int = 0
    white: int = 0
    black: int = 0
    not_finite: int = 0
    beyond: int = 0

    @classmethod
    def empty(cls, levels: int) -> _Tally:
        return cls(np.zeros(_SIDE**3, np.int64), np.zeros((3, levels), np.int64))

    def absorb(self, other: _Tally) -> None:
        self.cells += other.cells
        self.marginals += other.marginals
        for name in ("masked", "white", "black", "not_finite", "beyond"):
            setattr(self, name, getattr(self, name) + getattr(other, name))

    def frozen(self, bits: int) -> Histogram:
        cells = np.flatnonzero(self.cells)
        return Histogram(
            cells,
            self.cells[cells],
            self.marginals,
            bits,
            self.masked,
            self.white,
            self.black,
            self.not_finite,
            self.beyond,
        )


def count(
    source: PictureSource, *, mask: Mask | None = None, strip_rows: int | None = None, threads: int = 1
) -> Histogram:
    """Count every pixel of a picture.

    Args:
        source: the picture, or anything that gives its windows.
        mask: (rows, columns), true where a pixel counts; None counts all. Pixels of alpha 0 never count.
        strip_rows: rows read at a time; None chooses. The result does not depend on it.
        threads: strips counted at the same time; the result does not depend on it.

    Returns:
        The exact counts; masked, fully clipped and non-finite pixels apart.

    Raises:
        InputError: the mask does not have the picture's shape.
    """
    height, width = source.shape
    if mask is not None and mask.shape != (height, width):
        raise InputError(f"the mask is {mask.shape}, and the picture {(height, width)}; give one of the same size")
    rows = max(1, min(strip_rows or height, _STRIP_PIXELS // width or 1, -(-height // threads)))
    if threads == 1:
        return _count_strips(source, list(strips(source.shape, rows)), mask)
    windows = list(strips(source.shape, rows))
    with ThreadPoolExecutor(threads) as pool:
        shares = [windows[start::threads] for start in range(threads)]
        results = list(pool.map(lambda share: _tally_strips(source, share, mask), [s for s in shares if s]))
    return _sum(results)


def count_pixels(pixels: Pixels, bits: int, *, mask: Mask | None = None) -> Histogram:
    """Count the pixels of one window: (height, width, channels) in native depth.

    Args:
        pixels: uint8, uint16 or float32, 1 … 4 channels as in `arrays.Pixels`.
        bits: significant bits a channel; of no meaning for float.
        mask: (height, width), true where a pixel counts.
    """
    levels, depth = _depth(pixels.dtype, bits)
    tally = _Tally.empty(levels)
    _add(tally, pixels, mask)
    return tally.frozen(depth)


def _depth(dtype: np.dtype[np.generic], bits: int) -> tuple[int, int]:
    if dtype == np.float32:
        return _FLOAT_LEVELS, 16
    return 1 << max(bits, 8), max(bits, 8)


def _count_strips(source: PictureSource, windows: list[Window], mask: Mask | None) -> Histogram:
    return _sum([_tally_strips(source, windows, mask)])


def _sum(tallies: list[_Tally]) -> Histogram:
    first, *rest = tallies
    for tally in rest:
        first.absorb(tally)
    levels = first.marginals.shape[1]
    return first.frozen(levels.bit_length() - 1)


def _tally_strips(source: PictureSource, windows: list[Window], mask: Mask | None) -> _Tally:
    tally: _Tally | None = None
    for window in windows:
        pixels = source.read(window)
        if tally is None:
            tally = _Tally.empty(_depth(pixels.dtype, source.bits)[0])
        inside = None
        if mask is not None:
            rows = slice(window.top, window.top + window.height)
            inside = mask[rows, window.left : window.left + window.width]
        _add(tally, pixels, inside)
    if tally is None:
        raise InputError("a picture without pixels cannot be counted; give one with at least one row")
    return tally


def _add(tally: _Tally, pixels: Pixels, mask: Mask | None) -> None:
    channels = pixels.shape[2]
    counted = None if mask is None else np.ascontiguousarray(mask, dtype=bool)
    if channels in (2, 4):
        opaque = pixels[:, :, -1] > 0
        counted = opaque if counted is None else counted & opaque
        pixels = pixels[:, :, : channels - 1]
    if counted is not None:
        tally.masked += counted.size - int(np.count_nonzero(counted))
    if pixels.dtype == np.float32:
        pixels, counted = _quantise(tally, pixels, counted)
    _add_codes(tally, np.ascontiguousarray(pixels), counted)


def _quantise(tally: _Tally, pixels: Pixels, counted: Mask | None) -> tuple[Pixels, Mask]:
    """Round finite floats to 65,535 steps, and count apart what is not finite or out of range."""
    finite = np.asarray(np.isfinite(pixels).all(axis=2), dtype=bool)
    counted = np.ones(finite.shape, bool) if counted is None else counted
    tally.not_finite += int(np.count_nonzero(counted & ~finite))
    counted = counted & finite
    values = np.where(finite[:, :, None], pixels, np.float32(0))
    tally.beyond += int(np.count_nonzero(((values < 0) | (values > 1)).any(axis=2) & counted))
    steps = np.rint(np.clip(values, 0, 1) * np.float32(_FLOAT_LEVELS - 1)).astype(np.uint16)
    return steps, counted


def _add_codes(tally: _Tally, codes: Pixels, counted: Mask | None) -> None:
    import cv2

    levels = tally.marginals.shape[1]
    if codes.dtype == np.uint16 and levels < 1 << 16 and int(codes.max()) >= levels:
        above = (codes >= levels).any(axis=2)
        tally.beyond += int(np.count_nonzero(above if counted is None else above & counted))
        codes = np.minimum(codes, levels - 1)
    if codes.shape[2] == 1:
        codes = np.repeat(codes, 3, axis=2)
    mask = None if counted is None else counted.view(np.uint8)
    joint = cv2.calcHist([codes], [0, 1, 2], mask, [_SIDE] * 3, [0, levels] * 3).reshape(-1)
    tally.cells += joint.astype(np.int64)
    for channel in range(3):
        marginal = cv2.calcHist([codes], [channel], mask, [levels], [0, levels])
        tally.marginals[channel] += marginal.reshape(-1).astype(np.int64)
    tally.white += _set_apart(tally, codes, mask, levels - 1)
    tally.black += _set_apart(tally, codes, mask, 0)


def _set_apart(tally: _Tally, codes: Pixels, mask: NDArray[np.uint8] | None, code: int) -> int:
    """Move the pixels that have `code` in every channel out of the cells; return how many."""
    import cv2

    if not tally.marginals[:, code].all():
        return 0
    hit = cv2.inRange(codes, (code,) * 3, (code,) * 3)
    clipped = int(cv2.countNonZero(hit if mask is None else cv2.bitwise_and(hit, hit, mask=mask)))
    cell = -1 if code else 0
    tally.cells[cell] -= clipped
    tally.marginals[:, code] -= clipped
    return clipped
