"""Scene-linear light in files and the codes it has in memory: to the last bit where nothing was changed."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.colour.scene import to_codes, to_light
from hueferry.picture import Picture

Light = NDArray[np.float32]
"""(height, width, 1 … 4) light as a file holds it; the last channel of two or four is alpha."""

_UNCHANGED = 5e-7
"""Codes that a table may be off by rounding alone: 7 millionths of a stop."""

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
    pixels = picture.pixels
    colours = pixels.shape[2] - (1 if picture.has_alpha else 0)
    light = pixels.astype(np.float32)
    with np.errstate(invalid="ignore", over="ignore"):
        bare = to_light(pixels[:, :, :colours])
        if associated and picture.has_alpha:
            alpha = pixels[:, :, -1:].astype(np.float64)
            bare = np.where(alpha > 0, bare * alpha, bare)
        light[:, :, :colours] = bare
        original = picture.metadata.container.get("light")
        if isinstance(original, Original) and original.light.shape == pixels.shape:
            before = codes_of(original.light, associated=associated)
            same = (np.abs(before - pixels) <= _UNCHANGED) | ~np.isfinite(before)
            light = np.where(same, original.light, light)
    return light


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
