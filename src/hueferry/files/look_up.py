"""A table of 256 or 65,536 entries, read for every code of a picture, and means of neighbours."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels


def look_up_codes(pixels: Pixels, table: NDArray[Any]) -> Pixels:
    """Return `table[pixels]`; for 8-bit pixels several times faster than NumPy's indexing, and the same values.

    Args:
        pixels: any shape, uint8 or uint16.
        table: (256,) or (65536,), uint8 or uint16.
    """
    if pixels.dtype != np.uint8 or pixels.ndim != 3 or table.dtype not in (np.uint8, np.uint16):
        return np.asarray(table[pixels])
    import cv2

    height, width, channels = pixels.shape
    flat = np.ascontiguousarray(pixels).reshape(height, width * channels)
    return np.asarray(cv2.LUT(flat, table)).reshape(pixels.shape)


def average_fours(values: Pixels) -> Pixels:
    """Return the mean of every 2 × 2 values, a half rounded up.

    Args:
        values: (height, width, 1 … 4) uint16, height and width even.
    """
    import cv2

    height, width, channels = values.shape
    size = (width // 2, height // 2)
    return np.asarray(cv2.resize(values, size, interpolation=cv2.INTER_AREA)).reshape(height // 2, width // 2, channels)
