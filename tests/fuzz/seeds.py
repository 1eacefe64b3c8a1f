"""Small whole files of every kind that a reader has to know, made in code."""

from __future__ import annotations

import io

import numpy as np
from PIL import Image

_RNG = np.random.default_rng(11)
PIXELS = _RNG.integers(0, 256, (24, 40, 3)).astype(np.uint8)
PIXELS[:, :20] = np.linspace(30, 220, 24).astype(np.uint8)[:, None, None]


def _pillow(pixels: np.ndarray, kind: str, **options: object) -> bytes:
    stream = io.BytesIO()
    Image.fromarray(pixels).save(stream, kind, **options)
    return stream.getvalue()


def _exif() -> bytes:
    block = Image.Exif()
    block[0x0112], block[0x0131] = 6, "made by hand"
    return block.tobytes()


SEEDS: dict[str, tuple[bytes, ...]] = {
    "jpeg": (
        _pillow(PIXELS, "jpeg", quality=90, exif=_exif(), comment=b"lake"),
        _pillow(PIXELS, "jpeg", progressive=True, subsampling="4:2:0"),
        _pillow(PIXELS, "jpeg", restart_marker_rows=1),
        _pillow(PIXELS[:, :, 0], "jpeg"),
    ),
    "png": (
        _pillow(PIXELS, "png", exif=_exif(), icc_profile=bytes(200)),
        _pillow(PIXELS[:, :, 0], "png"),
        _pillow(np.dstack([PIXELS, PIXELS[:, :, 0]]), "png"),
        _pillow(PIXELS[:, :, 0].astype(np.uint16) * 257, "png"),
    ),
    "webp": (
        _pillow(PIXELS, "webp", lossless=True, exif=_exif()),
        _pillow(PIXELS, "webp", quality=80),
        _pillow(np.dstack([PIXELS, PIXELS[:, :, 0]]), "webp"),
    ),
}
"""Whole files by format."""
