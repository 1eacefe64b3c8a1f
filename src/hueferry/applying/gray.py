"""Gray pictures through a table: a gray stays a gray, as bright as the table makes it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.picture import Encoding
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

_FLOAT_STEPS = 1 << 16


def gray_curve(table: Table, encoding: Encoding, steps: int) -> NDArray[np.float64]:
    """Return what `steps` + 1 even grays of 0 … 1 become, as gray codes, not clipped.

    The table may tint a gray, and a gray picture cannot: the gray of the same luminance stands for it.
    """
    grays = np.repeat(np.linspace(0.0, 1.0, steps + 1)[:, None], 3, axis=1)
    mapped = look_up(table, grays)
    white = encoding.to_xyz(np.ones((1, 3)))
    luminance = encoding.to_xyz(mapped)[:, 1:2] / white[0, 1]
    neutral = encoding.from_xyz(luminance * white).mean(axis=1)
    # Where the table leaves grays alone they stay bit for bit, whatever the encoding's formulas round to.
    untouched = np.abs(mapped - grays).max(axis=1) < 1e-6
    return np.asarray(np.where(untouched, grays[:, 0], neutral))


def integer_gray_curve(table: Table, encoding: Encoding, *, bits: int) -> NDArray[np.uint16]:
    """Return the gray code that every one of 2**bits gray codes becomes."""
    top = 2**bits - 1
    return np.asarray(np.rint(np.clip(gray_curve(table, encoding, top), 0.0, 1.0) * top), dtype=np.uint16)


def map_float_grays(grays: NDArray[np.float32], table: Table, encoding: Encoding) -> NDArray[np.float32]:
    """Return float grays of any shape through the table; beyond 0 … 1 the shift of the nearer end is kept."""
    curve = gray_curve(table, encoding, _FLOAT_STEPS)
    inside = np.clip(np.nan_to_num(grays, posinf=1.0, neginf=0.0), 0.0, 1.0)
    shift = np.interp(inside, np.linspace(0.0, 1.0, len(curve)), curve - np.linspace(0.0, 1.0, len(curve)))
    return np.asarray(np.where(np.isfinite(grays), grays + shift, grays), dtype=np.float32)
