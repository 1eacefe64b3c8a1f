"""Exact counting of all pixels, strip by strip."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor

import numpy as np

from hueferry.arrays import Mask, Pixels
from hueferry.errors import InputError
from hueferry.palettes.cells import Cells, Spacing, spacing_of
from hueferry.palettes.histogram import Histogram
from hueferry.palettes.tally import Tally
from hueferry.picture import PictureSource, Window, strips

__all__ = ["Histogram", "count", "count_pixels"]

_FLOAT_BITS = 16


def count(
    source: PictureSource, *, mask: Mask | None = None, strip_rows: int | None = None, threads: int = 1
) -> Histogram:
    """Count every pixel of a picture.

    Args:
        source: the picture, or anything that gives its windows.
        mask: (rows, columns), true where a pixel counts; None counts all. Pixels of alpha 0 never count.
        strip_rows: rows read at a time, fewer than 2**24 pixels; None chooses. The result does not depend on it.
        threads: strips counted at the same time; the result does not depend on it.

    Returns:
        The exact counts; masked, fully clipped and non-finite pixels apart.

    Raises:
        InputError: the mask does not have the picture's shape.
    """
    height, width = source.shape
    if mask is not None and mask.shape != (height, width):
        raise InputError(f"the mask is {mask.shape}, and the picture {(height, width)}; give one of the same size")
    spacing = spacing_of(source.encoding)
    rows = strip_rows or _balanced_rows(source, threads)
    windows = list(strips(source.shape, rows))
    if threads == 1 or len(windows) == 1:
        return _tally(source, windows, mask, spacing).frozen()
    shares = [windows[start::threads] for start in range(min(threads, len(windows)))]
    with ThreadPoolExecutor(len(shares)) as pool:
        first, *rest = pool.map(lambda share: _tally(source, share, mask, spacing), shares)
    for tally in rest:
        first.absorb(tally)
    return first.frozen()


def count_pixels(pixels: Pixels, bits: int, *, mask: Mask | None = None, layout: Cells | None = None) -> Histogram:
    """Count the pixels of one window of fewer than 2**24.

    Args:
        pixels: (height, width, channels) uint8, uint16 or float32, as in `arrays.Pixels`.
        bits: significant bits a channel; of no meaning for float.
        mask: (height, width), true where a pixel counts.
        layout: how the code range is cut into cells; None cuts it evenly. Histograms to be merged need the same.
    """
    tally = Tally.empty(layout or layout_for(pixels, bits))
    tally.add(pixels, None if mask is None else np.asarray(mask, dtype=bool))
    return tally.frozen()


def layout_for(pixels: Pixels, bits: int, spacing: Spacing = Spacing.EVEN, *, inner: int = 127) -> Cells:
    """Return the cells for pixels of a dtype: float is counted in 65,535 steps."""
    return Cells(_FLOAT_BITS if pixels.dtype == np.float32 else bits, spacing, inner)


def _balanced_rows(source: PictureSource, threads: int) -> int:
    """Choose strips that are few, for each costs a pass over all cells, fit in memory, and share out evenly."""
    height, width = source.shape
    largest = 1 << 23 if source.bits <= 8 else 1 << 22
    strips_each = -(-height * width // (largest * threads))
    return max(1, -(-height // (strips_each * threads)))


def _tally(source: PictureSource, windows: list[Window], mask: Mask | None, spacing: Spacing) -> Tally:
    tally: Tally | None = None
    for window in windows:
        pixels = source.read(window)
        tally = tally or Tally.empty(layout_for(pixels, source.bits, spacing))
        rows = slice(window.top, window.top + window.height)
        counted = None if mask is None else np.asarray(mask[rows], dtype=bool)
        tally.add(pixels, counted)
    if tally is None:
        raise InputError("a picture without pixels cannot be counted; give one with at least one row")
    return tally
