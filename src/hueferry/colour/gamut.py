"""Colours that an encoding cannot hold, brought inside without tearing neighbours apart.

Clipping each channel by itself turns hues and flattens whole regions. Here lightness and hue are kept, and chroma is
compressed smoothly towards the largest that the encoding holds there, so order is kept. A colour may always lie as
near to the edge as its source did; so no change stays no change, whatever the picture.
"""

from __future__ import annotations

from functools import lru_cache

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.colour.spaces import oklab_to_xyz, xyz_to_oklab
from hueferry.picture import Encoding, EncodingKey

KNEE = 0.85
"""Share of the largest chroma below which nothing is compressed."""

LIGHTNESS_KNEE = 0.94
"""Share of white's lightness below which nothing is compressed towards white."""

_LEVELS, _HUES, _HALVINGS = 49, 120, 12
_MOST_CHROMA = 0.5
_INSIDE = 1e-6
_SAME = 2e-3
_EDGE = 1e-9

Line = NDArray[np.float64]


def compress(colours: Colours, encoding: Encoding, *, source: Colours | None = None) -> Colours:
    """Bring (n, 3) Oklab colours into the gamut of an encoding.

    Args:
        colours: what is wanted, of any size.
        encoding: whose codes 0 … 1 are the gamut.
        source: (n, 3) the colours they came from; each may stay as near to the edge as its source lies. None treats
            all alike, with the knees alone.

    Returns:
        (n, 3) colours of the same hue, inside the gamut as far as its edge is known: to a few hundredths of the
        chroma at its sharpest corners. Colours that are no nearer to the edge than their source, or than the knee,
        come back as they are.
    """
    edge = _edge_of(EncodingKey(encoding))
    lightness_knee, knee = np.full(len(colours), LIGHTNESS_KNEE), np.full(len(colours), KNEE)
    if source is not None:
        lightness_knee = np.maximum(lightness_knee, source[:, 0] / edge.white)
        knee = np.maximum(knee, edge.fill(source))
    lightness = np.maximum(_rolled(colours[:, 0] / edge.white, lightness_knee) * edge.white, 0.0)
    result = np.stack([lightness, colours[:, 1], colours[:, 2]], axis=1)
    fill = edge.fill(result)
    share = _rolled(fill, knee) / np.maximum(fill, _EDGE)
    result[:, 1:] *= np.where(fill > knee, share, 1.0)[:, None]
    return result


@attrs.frozen(eq=False)
class _Edge:
    """The largest chroma that an encoding holds, at even steps of lightness and hue.

    Attributes:
        white: Oklab lightness of the encoding's white.
        chroma: (levels, hues).
    """

    white: float
    chroma: Line = attrs.field(converter=read_only)

    def fill(self, colours: Colours) -> Line:
        """Return the share of the largest chroma that (n, 3) colours take up; above 1 they lie outside."""
        level = np.clip(colours[:, 0] / self.white, 0.0, 1.0) * (_LEVELS - 1)
        hue = np.arctan2(colours[:, 2], colours[:, 1]) / (2 * np.pi) % 1.0 * _HUES
        i, j = np.minimum(level.astype(np.intp), _LEVELS - 2), hue.astype(np.intp) % _HUES
        u, v, right = level - i, hue - np.floor(hue), (j + 1) % _HUES
        low = self.chroma[i, j] * (1 - v) + self.chroma[i, right] * v
        high = self.chroma[i + 1, j] * (1 - v) + self.chroma[i + 1, right] * v
        return np.asarray(np.hypot(colours[:, 1], colours[:, 2]) / np.maximum(low * (1 - u) + high * u, _EDGE))


@lru_cache(maxsize=16)
def _edge_of(key: EncodingKey) -> _Edge:
    """Find the edge of an encoding's gamut by bisection along chroma; once for each encoding."""
    encoding = key.encoding
    white = float(xyz_to_oklab(encoding.to_xyz(np.ones((1, 3))))[0, 0])
    lightness = np.linspace(0.0, white, _LEVELS)
    hue = np.linspace(0.0, 2 * np.pi, _HUES, endpoint=False)
    level, angle = (grid.ravel() for grid in np.meshgrid(lightness, hue, indexing="ij"))
    low, high = np.zeros(len(level)), np.full(len(level), _MOST_CHROMA)
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        colours = np.stack([level, middle * np.cos(angle), middle * np.sin(angle)], axis=1)
        inside = _is_inside(colours, encoding)
        low, high = np.where(inside, middle, low), np.where(inside, high, middle)
    return _Edge(white, low.reshape(_LEVELS, _HUES))


def _is_inside(colours: Colours, encoding: Encoding) -> NDArray[np.bool_]:
    """Return whether codes within 0 … 1 stand for the colours; an encoding of tables clips, so they are read back."""
    codes = encoding.from_xyz(oklab_to_xyz(colours))
    within = ((codes > -_INSIDE) & (codes < 1 + _INSIDE)).all(axis=1)
    back = xyz_to_oklab(encoding.to_xyz(codes))
    return np.asarray(within & (np.abs(back - colours).max(axis=1) < _SAME))


def _rolled(value: Line, knee: Line) -> Line:
    """Return values as they are up to the knee, and beyond it ever nearer to 1, with slope 1 at the knee."""
    room = np.maximum(1.0 - knee, _EDGE)
    beyond = np.maximum(value - knee, 0.0)
    return np.asarray(np.minimum(value, knee + room * (1.0 - np.exp(-beyond / room))))
