"""PNG: chunks read and spliced by ourselves, pixels by libpng or libspng."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.probe import check_size
from hueferry.picture import Encoding, Metadata

SIGNATURE = b"\x89PNG\r\n\x1a\n"
_XMP = b"XML:com.adobe.xmp\0"
_KEPT = frozenset({b"cICP", b"pHYs", b"tEXt", b"iTXt", b"zTXt", b"tIME", b"eXIf"})
_PROFILE_LIMIT = 64 << 20

Chunk = tuple[bytes, bytes]


def _chunks(path: Path, data: bytes) -> Iterator[Chunk]:
    position = len(SIGNATURE)
    while position + 12 <= len(data):
        length = int.from_bytes(data[position : position + 4], "big")
        kind = data[position + 4 : position + 8]
        if position + 12 + length > len(data):
            raise PictureError(path, "a PNG chunk is longer than the file; the file ends early")
        yield kind, data[position + 8 : position + 8 + length]
        if kind == b"IEND":
            return
        position += 12 + length
    raise PictureError(path, "the PNG stream ends early; copy the file again from its source")


def read_png(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
    """Decode a PNG at its own depth; colours stated by numbers go before a profile (PNG, third edition, clause 4.3).

    Raises:
        PictureError: the stream is broken.
        RefusedError: an animation, of which one frame alone would be kept, or light that is not relative.
    """
    import imagecodecs

    chunks = list(_chunks(path, data))
    if not chunks or chunks[0][0] != b"IHDR" or len(chunks[0][1]) != 13:
        raise PictureError(path, "the PNG stream has no header; the file is broken")
    if not accept_loss and any(kind == b"acTL" for kind, _ in chunks):
        raise RefusedError(path, "this PNG is animated, and all frames but one would be lost; accept the loss to go on")
    width, height = (int.from_bytes(chunks[0][1][start : start + 4], "big") for start in (0, 4))
    check_size(path, (height, width))
    try:
        pixels = np.atleast_3d(imagecodecs.png_decode(data))
    except (imagecodecs.PngError, ValueError, MemoryError) as error:
        raise PictureError(path, f"the PNG stream cannot be decoded: {error}") from error
    encoding = _stated(path, chunks)
    return Decoded(pixels, _metadata(chunks), None if encoding else _profile(path, chunks), encoding=encoding)


def _stated(path: Path, chunks: list[Chunk]) -> Encoding | None:
    """Return the encoding that a cICP chunk states by ITU-T H.273 numbers, or None."""
    from hueferry.files.iso_pictures import encoding_of

    numbers = next((body for kind, body in chunks if kind == b"cICP" and len(body) == 4), b"")
    return encoding_of(path, (numbers[0], numbers[1], numbers[2])) if numbers else None


def _metadata(chunks: list[Chunk]) -> Metadata:
    from hueferry.files.exif import orientation_of

    exif = next((body for kind, body in chunks if kind == b"eXIf"), b"")
    return Metadata(
        format="png",
        exif=exif,
        xmp=next((_text(body) for kind, body in chunks if kind == b"iTXt" and body.startswith(_XMP)), b""),
        orientation=orientation_of(exif),
        container={"chunks": tuple(chunk for chunk in chunks if chunk[0] in _KEPT)},
    )


def _text(body: bytes) -> bytes:
    """Return the text of an uncompressed iTXt chunk (PNG specification, clause 11.3.3.4)."""
    compressed = body[len(_XMP) : len(_XMP) + 1]
    parts = body[len(_XMP) + 2 :].split(b"\0", 2)
    return parts[2] if compressed == b"\0" and len(parts) == 3 else b""


def _profile(path: Path, chunks: list[Chunk]) -> bytes | None:
    body = next((body for kind, body in chunks if kind == b"iCCP"), None)
    if body is None:
        return None
    packed = body.split(b"\0", 1)[-1][1:]
    try:
        unpacker = zlib.decompressobj()
        profile = unpacker.decompress(packed, _PROFILE_LIMIT)
    except zlib.error as error:
        raise PictureError(path, f"the embedded profile cannot be unpacked: {error}") from error
    return profile or None


def write_png(pixels: Pixels, metadata: Metadata, profile: bytes | None) -> bytes:
    """Encode a PNG at the depth of its pixels, with profile and metadata."""
    import imagecodecs

    plain = np.ascontiguousarray(pixels[:, :, 0] if pixels.shape[2] == 1 else pixels)
    stream = bytes(imagecodecs.png_encode(plain, level=5))
    head = len(SIGNATURE) + 12 + 13
    extra = b"" if profile is None else _chunk(b"iCCP", b"icc\0\0" + zlib.compress(profile, 6))
    kept = metadata.container.get("chunks") if metadata.format == "png" else None
    if isinstance(kept, tuple):
        extra += b"".join(_chunk(kind, body) for kind, body in kept)
    else:
        extra += _chunk(b"eXIf", metadata.exif) if metadata.exif else b""
        extra += _chunk(b"iTXt", _XMP + b"\0\0\0\0" + metadata.xmp) if metadata.xmp else b""
    return stream[:head] + extra + stream[head:]


def _chunk(kind: bytes, body: bytes) -> bytes:
    return len(body).to_bytes(4, "big") + kind + body + zlib.crc32(kind + body).to_bytes(4, "big")
