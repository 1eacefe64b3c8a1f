"""Looking at a written file before it gets its name, with a decoder other than the reader's own where there is one."""

from __future__ import annotations

import io
from collections.abc import Callable, Mapping
from pathlib import Path
from types import MappingProxyType

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import HueferryError, OutputError
from hueferry.threads import each

Seen = tuple[tuple[int, int], str]
"""Rows and columns, and the format."""

_MOST_PIXELS = 89_000_000
"""Pixels beyond which Pillow's own guard against bombs speaks up, which stays on: the reader looks again instead."""


def verify(made: Path, path: Path, stored: Pixels, format_: str) -> None:
    """Check format and size of a written file, that all of it can be decoded, and for PNG every pixel.

    Args:
        made: the file, under a temporary name.
        path: the name that it is to get, for messages.
        stored: (h, w, channels) pixels that were to be written.
        format_: the format that was to be written.

    Raises:
        OutputError: it is not what it should be.
    """
    wanted = (int(stored.shape[0]), int(stored.shape[1]))
    large = wanted[0] * wanted[1] > _MOST_PIXELS and format_ != "jpeg"
    look = _read_again if large else _SECOND.get(format_, _read_again)
    try:
        shape, kind = look(made, stored)
    except (HueferryError, OSError, SyntaxError, ValueError, RuntimeError) as error:
        raise OutputError(path, f"the file that was written cannot be read again: {error}") from error
    if shape != wanted or kind != format_:
        raise OutputError(path, f"the file that was written came back as {kind} of {shape}")


def _read_again(made: Path, _: Pixels) -> Seen:
    from hueferry.files.read import read

    picture = read(made)
    return picture.shape, picture.metadata.format


def _seen_by_pillow(made: Path, _: Pixels) -> Seen:
    from PIL import Image

    with Image.open(made) as image:
        image.load()
        return (image.height, image.width), (image.format or "").lower()


def _jpeg_seen_by_pillow(made: Path, _: Pixels) -> Seen:
    from hueferry.files.jpeg import read_segments
    from hueferry.files.jpeg_parts import standing_alone

    data = made.read_bytes()
    parts = standing_alone(data)
    if len(parts) == 1 and np.prod(read_segments(made, data).shape, dtype=np.int64) > _MOST_PIXELS:
        return _read_again(made, _)
    return (sum(each(_decoded_rows, parts)), read_segments(made, data).shape[1]), "jpeg"


def _decoded_rows(stream: bytes) -> int:
    """Decode a JPEG at an eighth of its size, which reads all of its data, and return its full height."""
    from PIL import Image

    with Image.open(io.BytesIO(stream), formats=["JPEG"]) as image:
        height = image.height
        image.draft(None, (1, 1))
        image.load()
    return height


def _png_seen_by_pillow(made: Path, stored: Pixels) -> Seen:
    """Decode a PNG and compare it: whole codes, or the upper eight bits where Pillow keeps no more (16-bit colour)."""
    from PIL import Image

    with Image.open(made) as image:
        seen = np.atleast_3d(np.asarray(image))
        kind = (image.format or "").lower()
    if seen.shape[2] == 4 and stored.shape[2] == 2:  # deep gray with alpha comes as colour
        seen = seen[:, :, [0, 3]]
    deep = stored.dtype == np.uint16 and seen.dtype == np.uint8
    if seen.shape != stored.shape or not np.array_equal(seen, stored >> 8 if deep else stored):
        raise ValueError("its pixels are not those that were written")
    return (int(seen.shape[0]), int(seen.shape[1])), kind


def _seen_by_another_binding(made: Path, _: Pixels) -> Seen:
    import imagecodecs

    pixels = imagecodecs.jpegxl_decode(made.read_bytes())
    return (int(pixels.shape[0]), int(pixels.shape[1])), "jxl"


_SECOND: Mapping[str, Callable[[Path, Pixels], Seen]] = MappingProxyType(
    {
        "jpeg": _jpeg_seen_by_pillow,
        "png": _png_seen_by_pillow,
        "webp": _seen_by_pillow,
        "avif": _seen_by_pillow,
        "jxl": _seen_by_another_binding,
    }
)
"""Decoders other than the reader's own; without one, the reader reads again."""
