"""From a picture to its palette in one step."""

from __future__ import annotations

from hueferry.arrays import Mask
from hueferry.palettes.count import count
from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import reduce
from hueferry.picture import PictureSource


def palette_of(picture: PictureSource, *, mask: Mask | None = None, size: int = 1024, threads: int = 2) -> Palette:
    """Return the palette of all pixels of a picture.

    Args:
        picture: the picture, or anything that gives its windows.
        mask: (rows, columns), true where a pixel counts; pixels of alpha 0 never count.
        size: largest number of colours.
        threads: strips counted at the same time; the result does not depend on it.

    Raises:
        InputError: the mask has another shape, or leaves no pixel.
    """
    return reduce(count(picture, mask=mask, threads=threads), picture.encoding, size=size)
