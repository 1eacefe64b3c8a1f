"""How large a picture says it is, before anything of it is decoded."""

from __future__ import annotations

import struct
from pathlib import Path

from hueferry.errors import PictureError, RefusedError

MOST_PIXELS = 1_000_000_000
"""Pixels of the largest picture that is decoded whole; what is larger is a slide, which is read in windows."""


def check_size(path: Path, shape: tuple[int, int]) -> None:
    """Refuse a picture whose header promises more than can be decoded whole.

    Raises:
        RefusedError: it has more than `MOST_PIXELS` pixels.
    """
    height, width = shape
    if height * width > MOST_PIXELS:
        reason = f"its header promises {width:,} × {height:,} pixels, more than {MOST_PIXELS:,}"
        raise RefusedError(path, f"{reason}; if it is a slide, use the command stain, which reads in windows")


def webp_shape(data: bytes) -> tuple[int, int]:
    """Return rows and columns of a WebP file from its first chunk; zeros where it does not say (RFC 9649)."""
    kind, body = data[12:16], data[20:40]
    if kind == b"VP8X" and len(body) >= 10:
        return 1 + int.from_bytes(body[7:10], "little"), 1 + int.from_bytes(body[4:7], "little")
    if kind == b"VP8L" and len(body) >= 5:
        bits = int.from_bytes(body[1:5], "little")
        return 1 + (bits >> 14 & 0x3FFF), 1 + (bits & 0x3FFF)
    if kind == b"VP8 " and len(body) >= 10:
        width, height = struct.unpack_from("<HH", body, 6)
        return height & 0x3FFF, width & 0x3FFF
    return 0, 0


def promised_pixels(format_: str, data: bytes) -> int:
    """Return how many pixels the header of a JPEG, PNG or WebP promises; 0 for other formats and broken headers."""
    if format_ == "png":
        return int.from_bytes(data[16:20], "big") * int.from_bytes(data[20:24], "big")
    if format_ == "webp":
        height, width = webp_shape(data)
        return height * width
    if format_ != "jpeg":
        return 0
    from hueferry.files.jpeg import read_segments

    try:
        height, width = read_segments(Path("header"), data).shape
    except PictureError:
        return 0
    return height * width
