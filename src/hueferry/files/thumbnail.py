"""Small pictures for people: averaged in linear light, upright, sRGB, 8 bit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.picture import Picture

_BANDS = 256
"""Rows of the picture that are turned into linear light at a time."""

_TURNS = {2: (0, True), 3: (2, False), 4: (2, True), 5: (3, True), 6: (3, False), 7: (1, True), 8: (1, False)}
"""EXIF orientation to quarter turns (counterclockwise) and whether to mirror left and right after them."""


def thumbnail(picture: Picture, longest: int) -> Picture:
    """Return the picture with its longest side at most `longest`: upright, 8-bit sRGB, without metadata."""
    from hueferry.colour.encoding import SRGB
    from hueferry.colour.spaces import SRGB_TO_XYZ_D50
    from hueferry.colour.transfer import linear_to_srgb

    factor = max(1, -(-max(picture.shape) // longest))
    xyz = _averaged_xyz(picture, factor)
    linear = np.clip(xyz @ np.linalg.inv(SRGB_TO_XYZ_D50).T, 0.0, 1.0)
    small = np.rint(255 * linear_to_srgb(linear)).astype(np.uint8)
    return Picture(upright(small, picture.metadata.orientation), SRGB)


def upright(pixels: Pixels, orientation: int) -> Pixels:
    """Turn pixels as EXIF orientation 1 … 8 says they are to be shown."""
    turns, mirror = _TURNS.get(orientation, (0, False))
    turned = np.rot90(pixels, turns)
    return np.ascontiguousarray(turned[:, ::-1] if mirror else turned)


def _averaged_xyz(picture: Picture, factor: int) -> NDArray[np.float64]:
    """Average blocks of `factor` × `factor` pixels in linear light; a last partial block is left out."""
    height, width = (max(1, side // factor) for side in picture.shape)
    step_down, step_right = min(factor, picture.shape[0]), min(factor, picture.shape[1])
    rows = max(1, _BANDS // factor)
    bands = []
    for top in range(0, height, rows):
        count = min(rows, height - top)
        block = picture.pixels[top * step_down : (top + count) * step_down, : width * step_right]
        bands.append(_linear(picture, block).reshape(count, step_down, width, step_right, 3).mean(axis=(1, 3)))
    return np.concatenate(bands)


def _linear(picture: Picture, block: Pixels) -> NDArray[np.float64]:
    colour = block[:, :, :1].repeat(3, axis=2) if picture.is_gray else block[:, :, :3]
    codes = np.nan_to_num(colour.astype(np.float64) / picture.top_code, nan=0.0, posinf=1.0, neginf=0.0)
    return picture.encoding.to_xyz(codes.reshape(-1, 3)).reshape(*block.shape[:2], 3)
