"""The contact sheet: every picture of a run, before above after."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hueferry.picture import Picture
from hueferry.series.glimpse import Glimpse

NAME = "contact_sheet.jpg"

SURROUND = 119
"""Code of the sheet's gray, L* = 50 (IEC 61966-2-1): colour is judged on a neutral surround of middle lightness."""

MARGIN = 12

_AREA = 16e6
"""Pixels that the pictures before may take together."""

Thumb = NDArray[np.uint8]


def contact_sheet(pairs: Sequence[tuple[Thumb, Thumb]], *, columns: int = 4) -> Thumb:
    """Lay out pairs of sRGB thumbnails on a gray sheet, each picture above its result.

    Args:
        pairs: (before, after), each (h, w, 3) uint8 of any size; at least one pair.
        columns: pairs next to each other.

    Returns:
        (height, width, 3) uint8 sRGB.
    """
    cell_height = max(thumb.shape[0] for pair in pairs for thumb in pair)
    cell_width = max(thumb.shape[1] for pair in pairs for thumb in pair)
    columns = min(columns, len(pairs))
    rows = -(-len(pairs) // columns)
    step_down, step_right = 2 * cell_height + 3 * MARGIN, cell_width + MARGIN
    sheet = np.full((rows * step_down + MARGIN, columns * step_right + MARGIN, 3), SURROUND, np.uint8)
    for index, (before, after) in enumerate(pairs):
        top, left = (index // columns) * step_down + MARGIN, (index % columns) * step_right + MARGIN
        _place(sheet, before, top, left)
        _place(sheet, after, top + cell_height + MARGIN // 2, left)
    return sheet


def _place(sheet: Thumb, thumb: Thumb, top: int, left: int) -> None:
    sheet[top : top + thumb.shape[0], left : left + thumb.shape[1]] = thumb


def write_contact_sheet(glimpses: Sequence[Glimpse], folder: Path) -> Path:
    """Write the sheet of a run's pictures, 8-bit sRGB, into its folder and return its path."""
    from hueferry.colour.encoding import SRGB
    from hueferry.files.write import write

    longest, columns = _layout(len(glimpses))
    pairs = [(_small(one.before, longest), _small(one.after, longest)) for one in glimpses]
    return write(Picture(contact_sheet(pairs, columns=columns), SRGB), folder / NAME, overwrite=True)


def _layout(count: int) -> tuple[int, int]:
    """Return the longest side of a picture in pixels, and how many stand in a row, so that the sheet stays bounded."""
    columns = max(4, round((2 * count) ** 0.5))
    return int(np.clip((_AREA / count) ** 0.5, 64, 480)), columns


def _small(jpeg: bytes, longest: int) -> Thumb:
    from hueferry.colour.encoding import SRGB
    from hueferry.files.jpeg import jpeg_pixels
    from hueferry.files.thumbnail import thumbnail

    return np.asarray(thumbnail(Picture(jpeg_pixels(jpeg), SRGB), longest).pixels, np.uint8)
