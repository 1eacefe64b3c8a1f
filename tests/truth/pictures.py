"""Open photographs that installed wheels carry, read without any download.

`TUNED` are the ones that constants were chosen on; `HELD` were never looked at while choosing.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Pixels8 = NDArray[np.uint8]

TUNED = ("astronaut", "chelsea", "rocket", "china")
HELD = ("coffee", "flower", "motorcycle_left", "retina")
_SUFFIXES = (".png", ".jpg")


def _folders() -> tuple[Path, ...]:
    import skimage
    import sklearn

    return Path(skimage.__file__).parent / "data", Path(sklearn.__file__).parent / "datasets" / "images"


@cache
def load(name: str, long_side: int = 512) -> Pixels8:
    """Return a photograph by name, or by path, as (height, width, 3) sRGB, averaged down to `long_side`; 0 keeps it."""
    candidates = [folder / f"{name}{suffix}" for folder in _folders() for suffix in _SUFFIXES]
    path = next((candidate for candidate in [Path(name), *candidates] if candidate.is_file()), None)
    if path is None:
        raise FileNotFoundError(f"no installed package and no folder holds a picture named {name}")
    return shrink(_decode(path), long_side)


def shrink(pixels: Pixels8, long_side: int) -> Pixels8:
    """Average `pixels` down until the longer side is `long_side`; 0, or smaller already, keeps them."""
    import cv2

    factor = long_side / max(pixels.shape[:2])
    if long_side == 0 or factor >= 1:
        return pixels
    size = round(pixels.shape[1] * factor), round(pixels.shape[0] * factor)
    return np.asarray(cv2.resize(pixels, size, interpolation=cv2.INTER_AREA))


def _decode(path: Path) -> Pixels8:
    from PIL import Image

    with Image.open(path) as image:
        return np.asarray(image.convert("RGB"))
