"""Small pictures for people: averaged in linear light, upright, sRGB, 8 bit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.colour.encoding import MatrixEncoding
from hueferry.picture import Picture

_BANDS = 96
"""Rows of the picture that are turned into linear light at a time: few, so that they stay in the cache."""

_SAMPLES = 4
"""Pixels of a block, down and across, that stand for it where an encoding has no tone curves to look up."""

_TURNS = {2: (0, True), 3: (2, False), 4: (2, True), 5: (3, True), 6: (3, False), 7: (1, True), 8: (1, False)}
"""EXIF orientation to quarter turns (counterclockwise) and whether to mirror left and right after them."""


def thumbnail(picture: Picture, longest: int) -> Picture:
    """Return the picture with its longest side at most `longest`: upright, 8-bit sRGB, without metadata."""
    from hueferry.colour.encoding import SRGB
    from hueferry.colour.spaces import SRGB_TO_XYZ_D50
    from hueferry.colour.transfer import linear_to_srgb

    factor = max(1, -(-max(picture.shape) // longest))
    curves = isinstance(picture.encoding, MatrixEncoding)
    xyz = _averaged_by_curves(picture, factor) if curves else _averaged_samples(picture, factor)
    linear = np.clip(xyz @ np.linalg.inv(SRGB_TO_XYZ_D50).T, 0.0, 1.0)
    small = np.rint(255 * linear_to_srgb(linear)).astype(np.uint8)
    return Picture(upright(small, picture.metadata.orientation), SRGB)


def upright(pixels: Pixels, orientation: int) -> Pixels:
    """Turn pixels as EXIF orientation 1 … 8 says they are to be shown."""
    turns, mirror = _TURNS.get(orientation, (0, False))
    turned = np.rot90(pixels, turns)
    return np.ascontiguousarray(turned[:, ::-1] if mirror else turned)


def _averaged_by_curves(picture: Picture, factor: int) -> NDArray[np.float64]:
    """Average blocks of `factor` × `factor` pixels in linear light, XYZ; a last partial block is left out."""
    import cv2

    encoding = picture.encoding
    if not isinstance(encoding, MatrixEncoding):
        raise TypeError(encoding)
    table = _light_table(picture, encoding)
    step_down, step_right = min(factor, picture.shape[0]), min(factor, picture.shape[1])
    height, width = (max(1, side // factor) for side in picture.shape)
    rows = max(1, _BANDS // step_down)
    small = np.empty((height, width, 3), np.float64)
    for first in range(0, height, rows):
        count = min(rows, height - first)
        block = picture.pixels[first * step_down : (first + count) * step_down, : width * step_right]
        colour = block[:, :, :1].repeat(3, axis=2) if picture.is_gray else block[:, :, :3]
        small[first : first + count] = cv2.resize(_light(colour, table), (width, count), interpolation=cv2.INTER_AREA)
    return np.asarray(small @ encoding.matrix.T)


def _light_table(picture: Picture, encoding: MatrixEncoding) -> NDArray[np.float32]:
    """Return linear light for every code: (256, 3) for 8 bit, (65536, 3) for deeper pictures and float in 0 … 1."""
    last = 255 if picture.pixels.dtype == np.uint8 else 65535
    top = last if picture.pixels.dtype == np.float32 else picture.top_code
    codes = np.minimum(np.arange(last + 1) / top, 1.0)
    return np.stack([curve.decode(codes) for curve in encoding.curves], axis=1).astype(np.float32)


def _light(colour: Pixels, table: NDArray[np.float32]) -> NDArray[np.float32]:
    import cv2

    if colour.dtype == np.uint8:
        return np.asarray(cv2.LUT(np.ascontiguousarray(colour), table[np.newaxis]), np.float32)
    codes = _codes(colour)
    return np.stack([table[:, channel][codes[:, :, channel]] for channel in range(3)], axis=2)


def _codes(block: Pixels) -> Pixels:
    if block.dtype != np.float32:
        return block
    whole = np.where(block > 0, np.minimum(block, 1.0), 0.0)  # NaN is not above zero
    return np.asarray(whole * 65535.0 + 0.5).astype(np.uint16)


def _averaged_samples(picture: Picture, factor: int) -> NDArray[np.float64]:
    """Average in XYZ what a grid of pixels of every block is, where each pixel has to go through a profile's table."""
    height, width = (max(1, side // factor) for side in picture.shape)
    chosen = [_sampled(side, count) for side, count in zip(picture.shape, (height, width), strict=True)]
    block = picture.pixels[np.ix_(*(steps.ravel() for steps in chosen))]
    colour = block[:, :, :1].repeat(3, axis=2) if picture.is_gray else block[:, :, :3]
    codes = np.nan_to_num(colour.astype(np.float64) / picture.top_code, nan=0.0, posinf=1.0, neginf=0.0)
    xyz = picture.encoding.to_xyz(codes.reshape(-1, 3))
    down, right = (steps.shape[1] for steps in chosen)
    return np.asarray(xyz.reshape(height, down, width, right, 3).mean(axis=(1, 3)))


def _sampled(side: int, count: int) -> NDArray[np.intp]:
    """Return which of `side` pixels stand for each of `count` blocks: (count, samples), evenly within each block."""
    step = max(1, side // count) if count > 1 else side
    samples = min(_SAMPLES, step)
    within = (np.arange(samples) * 2 + 1) * step // (2 * samples)
    return np.asarray(np.arange(count)[:, np.newaxis] * step + within)
