"""Writing pictures: whole, verified, never over an original."""

from __future__ import annotations

import io
import os
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

from hueferry.errors import HueferryError, OutputError
from hueferry.files.atomic import write_bytes
from hueferry.files.read import SUFFIXES
from hueferry.picture import Picture

_EIGHT_BIT = frozenset({"jpeg", "webp"})


def write(picture: Picture, path: Path, *, overwrite: bool = False, quality: int | None = None) -> Path:
    """Write a picture in the format that the suffix of `path` names; profile and metadata go with it.

    A picture that came without a profile gets that of its encoding. The file is decoded again before it gets its name.

    Args:
        picture: the picture.
        path: where to; the folder must exist.
        overwrite: replace what is there, unless it is the picture's own original.
        quality: 1 … 100 for JPEG and WebP; None means no worse than the source.

    Raises:
        OutputError: the suffix names no format, the format cannot hold the picture, the name is taken or is that of
            the original, or nothing can be written there.
    """
    format_ = next((name for name, suffixes in SUFFIXES.items() if path.suffix.lower() in suffixes), "")
    if not format_:
        raise OutputError(path, "the suffix names no format; use .jpg, .png, .tif or .webp")
    if picture.path is not None and path.exists() and picture.path.exists() and path.samefile(picture.path):
        raise OutputError(path, "this is the original; choose another folder")
    if format_ in _EIGHT_BIT and picture.pixels.dtype != np.uint8:
        raise OutputError(path, f"{format_.upper()} holds 8 bits and the picture is deeper; write TIFF or PNG instead")
    if format_ == "jpeg" and picture.has_alpha:
        raise OutputError(path, "JPEG holds no alpha and the picture has some; write TIFF, PNG or WebP instead")
    if format_ == "png" and picture.pixels.dtype == np.float32:
        raise OutputError(path, "PNG holds integers and the picture is float; write TIFF instead")
    data = encode(picture, format_, quality=quality)
    return write_bytes(path, data, overwrite=overwrite, verify=lambda made: _verify(made, path, picture, format_))


def encode(picture: Picture, format_: str, *, quality: int | None = None) -> bytes:
    """Return the file of a picture in a format that can hold it."""
    profile = picture.encoding.profile
    if profile is None:
        from hueferry.colour.make_profile import profile_of

        profile = profile_of(picture.encoding)
    if format_ == "jpeg":
        from hueferry.files.jpeg import write_jpeg

        return write_jpeg(picture.pixels, picture.metadata, profile, quality=quality)
    if format_ == "webp":
        from hueferry.files.webp import write_webp

        return write_webp(picture.pixels, picture.metadata, profile, quality=quality)
    if format_ == "png":
        from hueferry.files.png import write_png

        return write_png(picture.pixels, picture.metadata, profile)
    from hueferry.files.tiff import write_tiff

    return write_tiff(picture.pixels, picture.metadata, profile)


def _verify(made: Path, path: Path, picture: Picture, format_: str) -> None:
    """Look at the written file with a second decoder: format, size, and that every pixel can be decoded."""
    try:
        shape, kind = _seen_by_pillow(made) if format_ in _EIGHT_BIT else _read_again(made)
    except (HueferryError, OSError, SyntaxError, ValueError) as error:
        raise OutputError(path, f"the file that was written cannot be read again: {error}") from error
    if shape != picture.shape or kind != format_:
        raise OutputError(path, f"the file that was written came back as {kind} of {shape}")


def _read_again(made: Path) -> tuple[tuple[int, int], str]:
    from hueferry.files.read import read

    picture = read(made)
    return picture.shape, picture.metadata.format


def _seen_by_pillow(made: Path) -> tuple[tuple[int, int], str]:
    from PIL import Image

    from hueferry.files.jpeg_parts import standing_alone

    with Image.open(made) as image:
        shape, kind = (image.height, image.width), (image.format or "").lower()
        if kind != "jpeg":
            image.load()
            return shape, kind
    parts = standing_alone(made.read_bytes())
    with ThreadPoolExecutor(min(len(parts), os.cpu_count() or 1)) as pool:
        rows = sum(pool.map(_decoded_rows, parts))
    return (rows, shape[1]), kind


def _decoded_rows(stream: bytes) -> int:
    """Decode a JPEG at an eighth of its size, which reads all of its data, and return its full height."""
    from PIL import Image

    with Image.open(io.BytesIO(stream)) as image:
        height = image.height
        image.draft(None, (1, 1))
        image.load()
    return height
