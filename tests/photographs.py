"""Real photographs that ship in the wheels of general-purpose libraries, and changes of light made to them."""

from __future__ import annotations

from functools import cache

import numpy as np
import skimage.data
from sklearn.datasets import load_sample_image

from hueferry.colour.encoding import SRGB
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear
from hueferry.picture import Picture

NAMES = ("astronaut", "chelsea", "coffee", "rocket", "china", "flower")


@cache
def photograph(name: str, *, step: int = 2) -> np.ndarray:
    """Return (h, w, 3) uint8 sRGB, every `step`-th pixel."""
    whole = load_sample_image(f"{name}.jpg") if name in ("china", "flower") else getattr(skimage.data, name)()
    pixels = np.ascontiguousarray(np.asarray(whole)[::step, ::step, :3])
    pixels.flags.writeable = False
    return pixels


def picture(pixels: np.ndarray) -> Picture:
    """Wrap sRGB pixels."""
    return Picture(pixels, SRGB)


def in_other_light(pixels: np.ndarray, *, gains: tuple[float, float, float] = (1.25, 1.0, 0.75)) -> np.ndarray:
    """Return the same scene under another light: gains in linear light, clipped to 8-bit sRGB."""
    linear = srgb_to_linear(pixels / 255) * np.array(gains) * 0.8
    return np.rint(255 * linear_to_srgb(np.clip(linear, 0, 1))).astype(np.uint8)
