"""TIFF by tifffile: 8, 16 bit and float, strips and tiles, any usual compression."""

from __future__ import annotations

import io
import logging
import struct
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TypeAlias

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.files.probe import check_size
from hueferry.picture import Metadata

TiffPage: TypeAlias = Any
"""A tifffile page; the library has no types."""

_ICC, _XMP, _IPTC, _ORIENTATION = 34675, 700, 33723, 274
_COMPRESSIONS = {1: None, 5: "lzw", 7: "jpeg", 8: "zlib", 32946: "zlib", 50000: "zstd"}
_BYTE, _SHORT, _UNDEFINED = 1, 3, 7
_BROKEN = (
    ValueError,
    KeyError,
    IndexError,
    RuntimeError,
    OSError,
    TypeError,
    MemoryError,
    AttributeError,
    ArithmeticError,
    AssertionError,
    struct.error,
)
"""What the library raises for files that are not what they say."""


def read_tiff(path: Path, data: bytes, *, accept_loss: bool) -> tuple[Pixels, Metadata, bytes | None]:
    """Decode the first page of a TIFF at its own depth: pixels, metadata and the ICC profile if there is one.

    Raises:
        PictureError: the file is broken.
        RefusedError: several pages, or a kind of picture that is not colour or gray.
    """
    import tifffile

    try:
        with _quiet(), tifffile.TiffFile(io.BytesIO(data)) as tiff:
            if not accept_loss:
                _check_single(path, len(tiff.pages))
            page: TiffPage = tiff.pages[0]
            pixels = _pixels(path, page)
            return pixels, _metadata(page, data), _bytes(page, _ICC) or None
    except RefusedError:
        raise
    except (tifffile.TiffFileError, *_BROKEN) as error:
        raise PictureError(path, f"the TIFF cannot be decoded: {error}") from error


@contextmanager
def _quiet() -> Iterator[None]:
    """Keep what the library logs of a broken file off the terminal: the error says it."""
    log = logging.getLogger("tifffile")
    before, log.disabled = log.disabled, True
    try:
        yield
    finally:
        log.disabled = before


def _check_single(path: Path, pages: int) -> None:
    if pages > 1:
        reason = f"the file holds {pages} pages, and all but the first would be lost"
        raise RefusedError(path, f"{reason}; accept the loss to go on")


def _pixels(path: Path, page: TiffPage) -> Pixels:
    kind = getattr(page.photometric, "name", str(page.photometric))
    if kind not in ("RGB", "MINISBLACK", "YCBCR"):
        raise RefusedError(path, f"this TIFF holds {kind} colour; convert it to RGB or gray first")
    check_size(path, (int(page.imagelength), int(page.imagewidth)))
    array = page.asarray()
    if page.planarconfig == 2 and array.ndim == 3:
        array = np.moveaxis(array, 0, -1)
    array = np.atleast_3d(array)
    if array.ndim != 3 or array.shape[2] not in (1, 2, 3, 4):
        raise RefusedError(path, f"this TIFF has the shape {array.shape}; a picture has 1 to 4 channels")
    if array.dtype == np.float16:
        return array.astype(np.float32)
    if array.dtype not in (np.uint8, np.uint16, np.float32):
        raise RefusedError(path, f"this TIFF holds {array.dtype} samples; save it as 8 bit, 16 bit or 32-bit float")
    return np.asarray(array)


def _bytes(page: TiffPage, code: int) -> bytes:
    tag = page.tags.get(code)
    if tag is None:
        return b""
    value = tag.value
    return bytes(value) if isinstance(value, bytes | tuple | list) else str(value).encode()


def _metadata(page: TiffPage, data: bytes) -> Metadata:
    from hueferry.files.tiff_exif import exif_of_tiff

    tag = page.tags.get(_ORIENTATION)
    orientation = int(tag.value) if tag is not None and 1 <= int(tag.value) <= 8 else 1
    return Metadata(
        format="tiff",
        exif=exif_of_tiff(data, orientation),
        xmp=_bytes(page, _XMP),
        iptc=_bytes(page, _IPTC),
        orientation=orientation,
        container={
            "compression": _COMPRESSIONS.get(int(page.compression), "zlib"),
            "predictor": int(page.predictor) > 1,
            "tile": tuple(page.tile) if page.is_tiled else None,
            "resolution": _resolution(page),
            "texts": tuple(
                (code, page.tags[code].value) for code in (270, 271, 272, 305, 306, 315, 33432) if code in page.tags
            ),
        },
    )


def _resolution(page: TiffPage) -> tuple[float, float, int] | None:
    across, down, unit = (page.tags.get(code) for code in (282, 283, 296))
    if across is None or down is None:
        return None
    ratios = [float(tag.value[0]) / max(float(tag.value[1]), 1.0) for tag in (across, down)]
    return ratios[0], ratios[1], 2 if unit is None else int(unit.value)


def write_tiff(pixels: Pixels, metadata: Metadata, profile: bytes | None) -> bytes:
    """Encode a TIFF at the depth of its pixels; lossless, also where the source was JPEG in TIFF."""
    import tifffile

    from hueferry.files.tiff_exif import texts_of_exif, with_exif

    facts = metadata.container if metadata.format == "tiff" else {}
    compression: Any = facts.get("compression", "zlib") or None
    compression = "zlib" if compression == "jpeg" else compression
    extra: list[Any] = [(_XMP, _BYTE, len(metadata.xmp), metadata.xmp, True)] if metadata.xmp else []
    extra += [(_IPTC, _UNDEFINED, len(metadata.iptc), metadata.iptc, True)] if metadata.iptc else []
    extra += [(_ORIENTATION, _SHORT, 1, metadata.orientation, True)] if metadata.orientation != 1 else []
    texts = facts.get("texts") or texts_of_exif(metadata.exif)
    extra += (
        [(code, 2, 0, str(text), True) for code, text in texts if isinstance(text, str)]
        if isinstance(texts, tuple | list)
        else []
    )
    tile: Any = facts.get("tile")
    resolution: Any = facts.get("resolution")
    channels = pixels.shape[2]
    buffer = io.BytesIO()
    tifffile.imwrite(
        buffer,
        pixels[:, :, 0] if channels == 1 else pixels,
        photometric="rgb" if channels >= 3 else "minisblack",
        planarconfig="contig" if channels > 1 else None,
        extrasamples=["unassalpha"] if channels in (2, 4) else None,
        compression=compression,
        predictor=bool(facts.get("predictor", True)) if compression in ("zlib", "lzw", "zstd") else None,
        tile=tile,
        rowsperstrip=None if tile else max(1, (1 << 20) // max(pixels[0].nbytes, 1)),
        resolution=None if resolution is None else resolution[:2],
        resolutionunit=None if resolution is None else resolution[2],
        iccprofile=profile,
        extratags=extra,
        metadata=None,
        software=False,
    )
    return with_exif(buffer.getvalue(), metadata.exif)
