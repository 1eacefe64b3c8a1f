"""A picture as a few hundred patches: colour, texture, place.

Texture is measured relative to lightness, so that a change of light leaves it nearly where it was: it says which
patches may be the same stuff, and colour is left to say what the light did.
"""

from __future__ import annotations

from collections.abc import Iterator
from math import sqrt

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Mask, Weights, read_only
from hueferry.palettes.palette import Palette

PATCHES = 340
"""Patches of a picture, about."""

FLATNESS = 0.03
"""Oklab; local deviation at which a pixel counts half in the mean of its patch: edges belong to no stuff."""

GRAIN = 0.01
"""Deviation over lightness that rounding and grain bring by themselves; below it textures are all one."""

FEWEST = 24
"""Patches below which a picture says nothing."""


@attrs.frozen(eq=False)
class Scene:
    """Patches of one picture.

    Attributes:
        colours: (n, 3) mean Oklab.
        textures: (n, 2) logarithms of the coarse and fine deviation of lightness over the mean lightness.
        places: (n, 2) row and column, 0 … 1.
    """

    colours: Colours = attrs.field(converter=read_only)
    textures: NDArray[np.float64] = attrs.field(converter=read_only)
    places: NDArray[np.float64] = attrs.field(converter=read_only)

    def __len__(self) -> int:
        return len(self.colours)

    @property
    def weights(self) -> Weights:
        """(n,) equal shares."""
        return np.full(len(self), 1 / max(len(self), 1))

    def part(self, chosen: Mask) -> Scene:
        """Return the patches where (n,) `chosen` is true."""
        return Scene(self.colours[chosen], self.textures[chosen], self.places[chosen])

    def halvings(self) -> Iterator[tuple[Scene, Scene]]:
        """Yield the four ways to cut the picture in two: upright, level, and along both diagonals."""
        row, column = self.places.T - 0.5
        for side in (column, row, row + column, row - column):
            yield self.part(side < 0), self.part(side >= 0)


def scene_of(oklab: NDArray[np.float32], counted: Mask, *, patches: int = PATCHES) -> Scene:
    """Cut (height, width, 3) `oklab` into about `patches` square patches, and keep those that count by half or more.

    Args:
        oklab: the reduced picture.
        counted: (height, width), true where a pixel counts.
        patches: how many are wanted.
    """
    import cv2

    height, width = counted.shape
    side = max(1.0, sqrt(height * width / patches))
    size = max(1, round(width / side)), max(1, round(height / side))
    share = cv2.resize(counted.astype(np.float32), size, interpolation=cv2.INTER_AREA)
    weight = counted / (FLATNESS**2 + _variance(oklab))
    total_weight = cv2.resize(weight, size, interpolation=cv2.INTER_AREA)

    def average(plane: NDArray[np.float32]) -> NDArray[np.float64]:
        total = cv2.resize(plane * weight, size, interpolation=cv2.INTER_AREA)
        return np.asarray(total / np.maximum(total_weight, 1e-6), dtype=np.float64)

    lightness = oklab[:, :, 0]
    fine = lightness - cv2.blur(lightness, (5, 5))
    mean = np.stack([average(oklab[:, :, axis]) for axis in range(3)], axis=2)
    coarse = np.sqrt(np.maximum(average(lightness * lightness) - mean[:, :, 0] ** 2, 0))
    level = np.maximum(mean[:, :, 0], 0) + 0.1
    fine_deviation = np.sqrt(average(fine * fine))
    textures = [np.log(coarse / level + 2 * GRAIN), np.log(fine_deviation / level + GRAIN)]
    rows, columns = np.meshgrid(
        (np.arange(size[1]) + 0.5) / size[1], (np.arange(size[0]) + 0.5) / size[0], indexing="ij"
    )
    whole = share > 0.5
    return Scene(mean[whole], np.stack(textures, axis=2)[whole], np.stack([rows, columns], axis=2)[whole])


def scene_of_pixels(oklab: NDArray[np.float32], counted: Mask) -> Scene:
    """Draw `PATCHES` single pixels of (height, width, 3) `oklab`, where `counted`, as patches without texture."""
    rows, columns = np.nonzero(counted)
    if len(rows) > PATCHES:
        drawn = np.sort(np.random.default_rng(0).choice(len(rows), PATCHES, replace=False))
        rows, columns = rows[drawn], columns[drawn]
    places = np.stack([(rows + 0.5) / counted.shape[0], (columns + 0.5) / counted.shape[1]], axis=1)
    return Scene(oklab[rows, columns], np.zeros((len(rows), 2)), places)


def scene_of_palette(palette: Palette) -> Scene:
    """Draw `PATCHES` colours of a palette, each as often as its weight says, as patches without texture or place.

    Colours at the ends of the range are left out: they may have been clipped.
    """
    inside = (palette.colours[:, 0] > 0.03) & (palette.colours[:, 0] < 0.985)
    weights = palette.weights * inside
    if weights.sum() <= 0:
        return Scene(np.empty((0, 3)), np.empty((0, 2)), np.empty((0, 2)))
    steps = (np.arange(PATCHES) + 0.5) / PATCHES * weights.sum()
    drawn = np.minimum(np.searchsorted(np.cumsum(weights), steps), len(weights) - 1)
    return Scene(palette.colours[drawn], np.zeros((PATCHES, 2)), np.full((PATCHES, 2), 0.5))


def _variance(oklab: NDArray[np.float32]) -> NDArray[np.float32]:
    """Return (height, width) the variance over 5 × 5 pixels, all channels together."""
    import cv2

    mean = cv2.blur(oklab, (5, 5))
    return np.asarray(np.maximum((cv2.blur(oklab * oklab, (5, 5)) - mean * mean).sum(axis=2), 0))
