"""Pictures drawn by code for the tests of evidence: textured scenes, patches, known changes of light."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.encoding import SRGB
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear
from hueferry.picture import Picture

Pixels8 = NDArray[np.uint8]

CAST = np.array([1.25, 1.0, 0.8]) * 0.85


def textured(seed: int, shape: tuple[int, int] = (300, 400)) -> Pixels8:
    """A wall of irregular, softly shaded shapes in many colours."""
    rng = np.random.default_rng(seed)
    picture = np.full((*shape, 3), rng.uniform(60, 190, 3), dtype=np.float32)
    for _ in range(260):
        centre = rng.uniform(0, [shape[1], shape[0]])
        outline = centre + rng.normal(0, rng.uniform(6, 40), (rng.integers(3, 7), 2))
        cv2.fillPoly(picture, [outline.astype(np.int32)], rng.uniform(15, 225, 3).tolist())
    shade = cv2.resize(rng.uniform(0.8, 1.1, (4, 4)).astype(np.float32), shape[::-1], interpolation=cv2.INTER_CUBIC)
    noisy = cv2.GaussianBlur(picture, (0, 0), 1.0) * shade[:, :, None] + rng.normal(0, 1.5, (*shape, 3))
    return np.clip(noisy, 0, 255).astype(np.uint8)


def relit(pixels: Pixels8, gains: NDArray[np.float64] = CAST) -> Pixels8:
    """Multiply scene light by three gains: the closed form of exposure and white balance."""
    codes = linear_to_srgb(srgb_to_linear(pixels / 255.0) * gains)
    return np.asarray(np.rint(np.clip(codes, 0, 1) * 255), dtype=np.uint8)


def picture_of(pixels: Pixels8) -> Picture:
    """Return sRGB pixels as a picture."""
    return Picture(pixels, SRGB)
