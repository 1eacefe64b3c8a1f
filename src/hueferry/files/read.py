"""Reading pictures: the bytes decide the format, the profile decides the colour."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import InputError, PictureError
from hueferry.picture import Encoding, Metadata, Picture

if TYPE_CHECKING:
    from hueferry.picture import PictureSource

Decoded = tuple[Pixels, Metadata, bytes | None]

SUFFIXES: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "jpeg": (".jpg", ".jpeg", ".jpe"),
        "png": (".png",),
        "tiff": (".tif", ".tiff"),
        "webp": (".webp",),
    }
)
"""Formats that are read and written, with the suffixes they usually have."""


def sniff(head: bytes) -> str:
    """Return the format that the first bytes of a file announce, or an empty string."""
    if head.startswith(b"\xff\xd8\xff"):
        return "jpeg"
    if head.startswith(b"\x89PNG\r\n\x1a\n"):
        return "png"
    if head[:4] in (b"II*\0", b"MM\0*", b"II+\0", b"MM\0+"):
        return "tiff"
    return "webp" if head[:4] == b"RIFF" and head[8:12] == b"WEBP" else ""


def read(path: Path, *, accept_loss: bool = False) -> Picture:
    """Read a picture with its encoding, depth and metadata; pixels stay as stored.

    Args:
        path: the file.
        accept_loss: go on where further frames or a gain map would be lost.

    Raises:
        PictureError: missing, empty, a folder, of an unknown format, or broken.
        RefusedError: understood, but reading would lose something; the message says the way round.
    """
    data = _bytes_of(path)
    format_ = sniff(data[:16])
    if not format_:
        raise PictureError(path, "this is not a JPEG, PNG, TIFF or WebP file, whatever its name says")
    pixels, metadata, profile = _decoder(format_)(path, data, accept_loss=accept_loss)
    encoding, notes = _encoding(path, profile)
    if path.suffix.lower() not in SUFFIXES[format_]:
        notes += (f"named {path.suffix or 'without a suffix'}, but it is {format_.upper()}",)
    bits = {np.dtype(np.uint8): 8, np.dtype(np.uint16): 16}.get(pixels.dtype, 32)
    return Picture(pixels, encoding, metadata, bits=bits, path=path, notes=notes)


def open_source(path: Path) -> PictureSource:
    """Open a picture for reading by windows."""
    return read(path)


def _bytes_of(path: Path) -> bytes:
    if path.is_dir():
        raise PictureError(path, "this is a folder, not a picture")
    try:
        data = path.read_bytes()
    except FileNotFoundError as error:
        raise PictureError(path, "there is no such file") from error
    except OSError as error:
        raise PictureError(path, f"the file cannot be read: {error.strerror or error}") from error
    if not data:
        raise PictureError(path, "the file is empty")
    return data


def _decoder(format_: str) -> Callable[..., Decoded]:
    from hueferry.files import jpeg, png, tiff, webp

    decoders: Mapping[str, Callable[..., Decoded]] = {
        "jpeg": jpeg.read_jpeg,
        "png": png.read_png,
        "tiff": tiff.read_tiff,
        "webp": webp.read_webp,
    }
    return decoders[format_]


def _encoding(path: Path, profile: bytes | None) -> tuple[Encoding, tuple[str, ...]]:
    from hueferry.colour.encoding import SRGB

    if profile is None:
        return SRGB, ("no profile: taken as sRGB",)
    from hueferry.colour.profile import read_profile

    try:
        return read_profile(profile), ()
    except InputError as error:
        raise PictureError(path, f"its colour profile cannot be used: {error}") from error
