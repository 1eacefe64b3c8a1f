"""A slide reduced to what a correction rests on: its thumbnail, its glass, and the densities of its tissue."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Colours, Mask, Pixels
from hueferry.picture import Encoding, Picture
from hueferry.slides.density import Density, Light
from hueferry.slides.tissue import Regions, find_tissue

MOST_PIXELS = 40_000
"""Tissue pixels that are looked at; taken at even steps, so that the same slide gives the same ones."""

_SIDE = 6


@attrs.frozen(eq=False)
class Look:
    """What is known of a slide.

    Attributes:
        thumbnail: (height, width, 3) in the slide's own dtype.
        regions: tissue, pen, padding, glass.
        scale: codes to optical density against its own glass.
        codes: (n, 3) codes of tissue pixels, 0 … 1.
        density: (n, 3) their optical density.
        blocks: (n,) which block of a 6 × 6 grid each lies in.
        bits: significant bits a channel of the slide.
    """

    thumbnail: Pixels
    regions: Regions
    scale: Density
    codes: Codes
    density: Colours
    blocks: NDArray[np.int64]
    bits: int

    @property
    def empty(self) -> bool:
        """Whether there is too little tissue to say anything."""
        return len(self.density) < 200

    @property
    def picture(self) -> Picture:
        """The thumbnail as a picture."""
        return Picture(self.thumbnail, self.scale.encoding, bits=self.bits)


def look_at(
    thumbnail: Pixels, encoding: Encoding, *, bits: int = 8, light: Light = Light.ENCODED, mask: Mask | None = None
) -> Look:
    """Look at a slide's thumbnail.

    Args:
        thumbnail: (height, width, 3 or 4), uint8, uint16 or float32.
        encoding: how its codes stand for colour.
        bits: significant bits a channel.
        light: what Beer–Lambert's law is applied to.
        mask: (height, width) where tissue may be; None looks everywhere.
    """
    top = 1.0 if thumbnail.dtype == np.float32 else float(2**bits - 1)
    codes = thumbnail[:, :, :3].astype(np.float32) / np.float32(top)
    regions = find_tissue(codes, mask=mask)
    scale = Density(np.clip(regions.glass.white, 0.02, 1.0), encoding, light)
    rows, columns = np.nonzero(regions.tissue)
    step = max(1, -(-len(rows) // MOST_PIXELS))
    rows, columns = rows[::step], columns[::step]
    chosen = thumbnail[rows, columns, :3].astype(np.float64) / top
    height, width = codes.shape[:2]
    blocks = (rows * _SIDE // height) * _SIDE + columns * _SIDE // width
    return Look(thumbnail[:, :, :3], regions, scale, chosen, scale.of(chosen), blocks, bits)
