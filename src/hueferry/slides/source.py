"""What a slide is: a picture read in windows, with its levels and its pixel pitch."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import Protocol

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.errors import InputError
from hueferry.picture import Encoding, Window

THUMBNAIL = 1024
"""Longest side, in pixels, of the thumbnail that a slide is looked at with."""

_MOST_AT_ONCE = 1 << 20
"""Pixels that are averaged at a time."""


def _frozen(texts: Mapping[str, str]) -> Mapping[str, str]:
    return MappingProxyType(dict(texts))


@attrs.frozen
class SlideFacts:
    """What a file says of a slide besides its pixels.

    Attributes:
        format: the container.
        pitch: (x, y) micrometres a pixel at full size; None where the file does not say.
        background: (3,) codes, 0 … 255, of what was not scanned; None where the file does not say.
        texts: free text and identifiers by name; they travel only when asked for.
    """

    format: str
    pitch: tuple[float, float] | None = None
    background: tuple[int, int, int] | None = None
    texts: Mapping[str, str] = attrs.field(factory=dict, converter=_frozen)


class SlideSource(Protocol):
    """A slide, read by windows of any of its levels. Any number of threads may read at once.

    A `PictureSource` of its full size; nothing ever holds a level whole.
    """

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns at full size."""
        ...

    @property
    def levels(self) -> Sequence[tuple[int, int]]:
        """Rows and columns of every level, largest first."""
        ...

    @property
    def encoding(self) -> Encoding:
        """How code values stand for colour."""
        ...

    @property
    def bits(self) -> int:
        """Significant bits a channel."""
        ...

    @property
    def facts(self) -> SlideFacts:
        """What else the file says."""
        ...

    def read(self, window: Window) -> Pixels:
        """Return (height, width, 3) of the full size."""
        ...

    def read_level(self, level: int, window: Window) -> Pixels:
        """Return (height, width, 3) of a level."""
        ...

    def close(self) -> None:
        """Let go of the file."""
        ...


def thumbnail_of(source: SlideSource, *, side: int = THUMBNAIL) -> Pixels:
    """Return a slide averaged down to at most `side` pixels a side, from its smallest level that is large enough.

    The average is over whole blocks of codes; a slide that is small already is returned as it is.

    Raises:
        InputError: the slide is gray.
    """
    level = max(
        (i for i, shape in enumerate(source.levels) if max(shape) >= min(side, max(source.shape)) or i == 0),
        key=lambda i: i,
    )
    height, width = source.levels[level]
    factor = max(1, -(-max(height, width) // side))
    band = max(1, _MOST_AT_ONCE // (width * factor)) * factor
    rows = []
    for top in range(0, height, band):
        pixels = source.read_level(level, Window(top, 0, min(band, height - top), width))
        if pixels.shape[2] < 3:
            raise InputError("the slide is gray; stains need colour")
        rows.append(block_means(pixels[:, :, :3], factor))
    return np.ascontiguousarray(np.concatenate(rows))


def block_means(pixels: Pixels, factor: int) -> Pixels:
    """Average blocks of `factor` × `factor`; blocks at the right and lower edge may be smaller."""
    if factor == 1:
        return pixels
    height, width = pixels.shape[:2]
    rows, columns = np.arange(0, height, factor), np.arange(0, width, factor)
    total: NDArray[np.float64] = np.add.reduceat(pixels.astype(np.float64), rows, axis=0)
    total = np.add.reduceat(total, columns, axis=1)
    counts = np.diff(np.append(rows, height))[:, None] * np.diff(np.append(columns, width))[None, :]
    mean = total / counts[:, :, None]
    return np.asarray(mean if pixels.dtype == np.float32 else np.rint(mean), dtype=pixels.dtype)
