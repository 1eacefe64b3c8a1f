"""Scene-linear light in files and the codes it has in memory: to the last bit where nothing was changed."""

from __future__ import annotations

from collections.abc import Iterator

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.colour.scene import to_codes, to_light
from hueferry.picture import Picture, strips

Light = NDArray[np.float32]
"""(height, width, 1 … 4) light as a file holds it; the last channel of two or four is alpha."""

_UNCHANGED = 5e-7
"""Codes that a table may be off by rounding alone: 7 millionths of a stop."""

_BAND = 1 << 18
"""Pixels of a band."""

NOTE = "scene-linear light, held as codes log2(1 + 128 x) / 14 of 0 … 128 times diffuse white"


@attrs.frozen(eq=False)
class Original:
    """The light of a file as it was read, which travels with the picture's metadata."""

    light: Light


def codes_of(light: Light, *, associated: bool) -> Pixels:
    """Return the codes of light, and its alpha as it is.

    Args:
        light: as in the file.
        associated: whether colours are multiplied by alpha in the file; codes are those of the colours themselves.
    """
    coded = np.empty(light.shape, np.float32)
    for rows in bands(light.shape):
        coded[rows] = _band_of_codes(light[rows], associated=associated)
    return coded


def _band_of_codes(light: Light, *, associated: bool) -> Pixels:
    coded = light.copy()
    colour = _straight(light, associated=associated)
    with np.errstate(invalid="ignore", over="ignore"):
        coded[:, :, : colour.shape[2]] = to_codes(colour)
    return coded


def light_of(picture: Picture, *, associated: bool) -> Light:
    """Return the light of a picture; what still has the code it was read with comes back to the last bit.

    Args:
        picture: in a `SceneLinear` encoding.
        associated: whether colours are to be multiplied by alpha.
    """
    original = picture.metadata.container.get("light")
    kept = original.light if isinstance(original, Original) and original.light.shape == picture.pixels.shape else None
    light = np.empty(picture.pixels.shape, np.float32)
    for rows in bands(light.shape):
        light[rows] = _band_of_light(picture.pixels[rows], None if kept is None else kept[rows], associated=associated)
    return light


def _band_of_light(pixels: Pixels, original: Light | None, *, associated: bool) -> Light:
    light = pixels.astype(np.float32)
    colours = pixels.shape[2] - (pixels.shape[2] in (2, 4))
    with np.errstate(invalid="ignore", over="ignore"):
        bare = to_light(pixels[:, :, :colours])
        if associated and colours < pixels.shape[2]:
            alpha = pixels[:, :, -1:].astype(np.float64)
            bare = np.where(alpha > 0, bare * alpha, bare)
        light[:, :, :colours] = bare
        if original is not None:
            before = _band_of_codes(original, associated=associated)
            same = (np.abs(before - pixels) <= _UNCHANGED) | ~np.isfinite(before)
            light = np.where(same, original, light)
    return light


def bands(shape: tuple[int, ...]) -> Iterator[slice]:
    """Cut rows into bands of a quarter of a million pixels, so that numbers in double precision take little room."""
    for window in strips((shape[0], shape[1]), max(1, _BAND // shape[1])):
        yield slice(window.top, window.top + window.height)


def _straight(light: Light, *, associated: bool) -> NDArray[np.float64]:
    """Return colours without their alpha; where alpha is 0 they are emission alone and stay as they are."""
    channels = light.shape[2]
    if channels in (1, 3):
        return light.astype(np.float64)
    colour = light[:, :, :-1].astype(np.float64)
    if not associated:
        return colour
    alpha = light[:, :, -1:].astype(np.float64)
    with np.errstate(invalid="ignore", over="ignore"):
        return np.where(alpha > 0, colour / np.where(alpha > 0, alpha, 1.0), colour)
