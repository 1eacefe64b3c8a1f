"""PNG: chunks read and spliced by ourselves, pixels by libpng or libspng."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.png_colour import significant_bits_note, stated_by_chunks
from hueferry.files.png_text import unpacked, xmp_body, xmp_of
from hueferry.files.probe import check_size
from hueferry.picture import Encoding, Metadata

SIGNATURE = b"\x89PNG\r\n\x1a\n"
_KEPT = frozenset({b"cICP", b"pHYs", b"tEXt", b"iTXt", b"zTXt", b"tIME", b"eXIf"})
_USED = frozenset({b"sBIT", b"sRGB", b"gAMA", b"cHRM", b"iCCP", b"tRNS", b"acTL", b"fcTL", b"fdAT"})
"""Chunks that are understood on the way in and stated anew, or not at all, on the way out."""

Chunk = tuple[bytes, bytes]


def _chunks(path: Path, data: bytes) -> Iterator[Chunk]:
    position = len(SIGNATURE)
    while position + 12 <= len(data):
        length = int.from_bytes(data[position : position + 4], "big")
        kind = data[position + 4 : position + 8]
        if position + 12 + length > len(data):
            raise PictureError(path, "a PNG chunk is longer than the file; the file ends early")
        body = data[position + 8 : position + 8 + length]
        stated = int.from_bytes(data[position + 8 + length : position + 12 + length], "big")
        if not kind[0] & 0x20 and zlib.crc32(body, zlib.crc32(kind)) != stated:
            raise PictureError(path, "a checksum of the PNG stream is wrong; copy the file again from its source")
        yield kind, body
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
    animated = any(kind == b"acTL" for kind, _ in chunks)
    if not accept_loss and animated:
        raise RefusedError(path, "this PNG is animated, and all frames but one would be lost; accept the loss to go on")
    width, height = (int.from_bytes(chunks[0][1][start : start + 4], "big") for start in (0, 4))
    check_size(path, (height, width))
    try:
        pixels = np.atleast_3d(imagecodecs.png_decode(_bare(chunks)))
    except (imagecodecs.PngError, ValueError, MemoryError) as error:
        raise PictureError(path, f"the PNG stream cannot be decoded: {error}") from error
    metadata, notes = _metadata(path, chunks), _notes(chunks)
    if animated:
        notes = ("this PNG is animated; the loss of all frames but the first was accepted", *notes)
    encoding = _stated(path, chunks)
    profile = None if encoding else _profile(path, chunks)
    if encoding is None and profile is None:
        encoding, said = stated_by_chunks(dict(reversed(chunks)))
        notes += said
    return Decoded(pixels, metadata, profile, encoding=encoding, notes=notes)


def _notes(chunks: list[Chunk]) -> tuple[str, ...]:
    depth = {3: 8}.get(chunks[0][1][9], chunks[0][1][8])
    notes = significant_bits_note(next((body for kind, body in chunks if kind == b"sBIT"), b""), depth)
    known = _KEPT | _USED
    lost = sorted({kind.decode("latin-1") for kind, _ in chunks if kind not in known and kind[0] & 0x20})
    named = ", ".join(name if name.isalnum() else "one without a name" for name in lost[:9])
    return (*notes, f"PNG chunks that cannot be kept with changed pixels were left out: {named}") if lost else notes


def _bare(chunks: list[Chunk]) -> bytes:
    """Return a PNG of what its pixels need, in order: the decoder complains aloud where others are broken."""
    colour = chunks[0][1][9]
    palette = [chunk for chunk in chunks if chunk[0] == b"PLTE" and colour == 3][:1]
    most = len(palette[0][1]) // 3 if palette else 0
    fits = {0: (2, 2), 2: (6, 6), 3: (1, most)}.get(colour, (1, 0))
    clear = [chunk for chunk in chunks if chunk[0] == b"tRNS" and fits[0] <= len(chunk[1]) <= fits[1]][:1]
    data = [chunk for chunk in chunks if chunk[0] == b"IDAT"]
    needed = (chunks[0], *palette, *clear, *data, (b"IEND", b""))
    return SIGNATURE + b"".join(_chunk(kind, body) for kind, body in needed)


def _stated(path: Path, chunks: list[Chunk]) -> Encoding | None:
    """Return the encoding that a cICP chunk states by ITU-T H.273 numbers, or None."""
    from hueferry.files.iso_pictures import encoding_of

    numbers = next((body for kind, body in chunks if kind == b"cICP" and len(body) == 4), b"")
    return encoding_of(path, (numbers[0], numbers[1], numbers[2])) if numbers else None


def _metadata(path: Path, chunks: list[Chunk]) -> Metadata:
    from hueferry.files.exif import orientation_of

    exif = next((body for kind, body in chunks if kind == b"eXIf"), b"")
    return Metadata(
        format="png",
        exif=exif,
        xmp=xmp_of(path, chunks),
        orientation=orientation_of(exif),
        container={"chunks": tuple(chunk for chunk in chunks if chunk[0] in _KEPT)},
    )


def _profile(path: Path, chunks: list[Chunk]) -> bytes | None:
    body = next((body for kind, body in chunks if kind == b"iCCP"), None)
    if body is None:
        return None
    packed = body.split(b"\0", 1)[-1][1:]
    return unpacked(path, packed, "profile") or None


def write_png(pixels: Pixels, metadata: Metadata, profile: bytes | None) -> bytes:
    """Encode a PNG at the depth of its pixels, with profile and metadata."""
    import imagecodecs

    plain = np.ascontiguousarray(pixels[:, :, 0] if pixels.shape[2] == 1 else pixels)
    stream = bytes(imagecodecs.png_encode(plain, level=5))
    head = len(SIGNATURE) + 12 + 13
    extra = b"" if profile is None else _chunk(b"iCCP", b"icc\0\0" + zlib.compress(profile, 6))
    kept = metadata.container.get("chunks") if metadata.format == "png" else None
    if isinstance(kept, tuple):
        extra += b"".join(_chunk(kind, metadata.exif if kind == b"eXIf" else body) for kind, body in kept)
        if metadata.exif and not any(kind == b"eXIf" for kind, _ in kept):
            extra += _chunk(b"eXIf", metadata.exif)
    else:
        extra += _chunk(b"eXIf", metadata.exif) if metadata.exif else b""
        extra += _chunk(b"iTXt", xmp_body(metadata.xmp)) if metadata.xmp else b""
    return stream[:head] + extra + stream[head:]


def _chunk(kind: bytes, body: bytes) -> bytes:
    return len(body).to_bytes(4, "big") + kind + body + zlib.crc32(kind + body).to_bytes(4, "big")
