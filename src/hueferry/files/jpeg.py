"""JPEG: segments read and spliced by ourselves, pixels by libjpeg-turbo."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from functools import cache
from pathlib import Path
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.files.probe import check_size
from hueferry.picture import Metadata

_SOI, _EOI, _SOS, _DQT, _COM = 0xD8, 0xD9, 0xDA, 0xDB, 0xFE
_APP0, _APP1, _APP2, _APP13, _APP14, _APP15 = 0xE0, 0xE1, 0xE2, 0xED, 0xEE, 0xEF
_FRAMES = frozenset({*range(0xC0, 0xD0)} - {0xC4, 0xC8, 0xCC})
_EXIF, _XMP, _IPTC = b"Exif\0\0", b"http://ns.adobe.com/xap/1.0/\0", b"Photoshop 3.0\0"
_ICC, _MULTI = b"ICC_PROFILE\0", b"MPF\0"
_BLOCK_LIMIT = 65_533


@attrs.frozen(eq=False)
class Segments:
    """What stands before the first scan of a JPEG stream.

    Attributes:
        parts: (marker, payload) in order.
        frame: payload of the frame header: precision, rows, columns, components.
        scan: offset of the first scan.
    """

    parts: tuple[tuple[int, bytes], ...]
    frame: bytes
    scan: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return int.from_bytes(self.frame[1:3], "big"), int.from_bytes(self.frame[3:5], "big")

    @property
    def components(self) -> int:
        """1 gray, 3 colour, 4 CMYK."""
        return self.frame[5]

    @property
    def sampling(self) -> str:
        """Chroma subsampling: "444", "422", "420" or, for gray and rarer ones, the nearest that is no coarser."""
        if self.components != 3:
            return "444"
        across, down = divmod(self.frame[7], 16)
        return {(1, 1): "444", (2, 1): "422", (2, 2): "420"}.get((across, down), "444")


def read_segments(path: Path, data: bytes) -> Segments:
    """Read the segments before the first scan.

    Raises:
        PictureError: the stream is broken, or ends before its picture does.
    """
    parts: list[tuple[int, bytes]] = []
    frame, position = b"", 2
    for marker, payload, end in _walk(path, data):
        position = end
        if marker == _SOS:
            break
        if marker in _FRAMES:
            frame = payload
        parts.append((marker, payload))
    if len(frame) < 6 + 3 * (frame[5] if len(frame) > 5 else 255):
        raise PictureError(path, "the JPEG stream has no frame header; the file is broken")
    if data.rfind(b"\xff\xd9") < position:
        raise PictureError(path, "the JPEG stream ends early; copy the file again from its source")
    return Segments(tuple(parts), frame, position)


def _walk(path: Path, data: bytes) -> Iterator[tuple[int, bytes, int]]:
    position = 2
    while True:
        while position < len(data) and data[position] == 0xFF and data[position + 1 : position + 2] == b"\xff":
            position += 1
        if position + 4 > len(data) or data[position] != 0xFF:
            raise PictureError(path, "the JPEG stream ends before its picture begins; the file is broken")
        marker, length = data[position + 1], int.from_bytes(data[position + 2 : position + 4], "big")
        if length < 2 or position + 2 + length > len(data):
            raise PictureError(path, "a JPEG segment is longer than the file; the file is broken")
        yield marker, data[position + 4 : position + 2 + length], position
        if marker == _SOS:
            return
        position += 2 + length


def read_jpeg(path: Path, data: bytes, *, accept_loss: bool) -> tuple[Pixels, Metadata, bytes | None]:
    """Decode a JPEG: pixels, metadata and the ICC profile if there is one.

    Raises:
        PictureError: the stream is broken.
        RefusedError: CMYK, more than 8 bits, or further pictures in the file that would be lost.
    """
    import imagecodecs

    segments = read_segments(path, data)
    if segments.components not in (1, 3):
        raise RefusedError(path, "this is a CMYK JPEG; convert it to RGB with its profile first")
    if segments.frame[0] != 8:
        raise RefusedError(path, f"this JPEG has {segments.frame[0]} bits a channel; save it as TIFF")
    if not accept_loss and any(m == _APP2 and p.startswith(_MULTI) for m, p in segments.parts):
        reason = "the file holds a gain map or further pictures, which would be lost; accept the loss to go on"
        raise RefusedError(path, reason)
    check_size(path, segments.shape)
    try:
        pixels = imagecodecs.jpeg8_decode(data)
    except (imagecodecs.Jpeg8Error, ValueError, MemoryError) as error:
        raise PictureError(path, f"the JPEG stream cannot be decoded: {error}") from error
    return np.atleast_3d(pixels), _metadata(segments), _profile(segments)


def _metadata(segments: Segments) -> Metadata:
    from hueferry.files.exif import orientation_of

    exif = _first(segments, _APP1, _EXIF)
    return Metadata(
        format="jpeg",
        exif=exif,
        xmp=_first(segments, _APP1, _XMP),
        iptc=_first(segments, _APP13, _IPTC),
        orientation=orientation_of(exif),
        container={
            "sampling": segments.sampling,
            "tables": tuple(payload for marker, payload in segments.parts if marker == _DQT),
            "segments": tuple((m, p) for m, p in segments.parts if m == _COM or (_APP1 <= m <= _APP15 and m != _APP14)),
            "density": next((p[7:12] for m, p in segments.parts if m == _APP0 and p.startswith(b"JFIF\0")), b""),
        },
    )


def _first(segments: Segments, marker: int, head: bytes) -> bytes:
    return next((p[len(head) :] for m, p in segments.parts if m == marker and p.startswith(head)), b"")


def _profile(segments: Segments) -> bytes | None:
    """Join the numbered pieces of an ICC profile (ICC.1:2022, annex B.4)."""
    pieces = sorted((p[12], p[14:]) for m, p in segments.parts if m == _APP2 and p.startswith(_ICC) and len(p) > 14)
    return b"".join(piece for _, piece in pieces) or None


def jpeg_bytes(pixels: NDArray[np.uint8], *, quality: int = 96, sampling: str = "444") -> bytes:
    """Encode (h, w, 1 or 3) 8-bit pixels, without metadata."""
    import imagecodecs

    from hueferry.files.jpeg_parts import encode_in_parts

    if pixels.shape[2] == 3:
        return encode_in_parts(pixels, quality=quality, sampling=sampling)
    return bytes(imagecodecs.jpeg8_encode(np.ascontiguousarray(pixels[:, :, 0]), level=quality))


def jpeg_pixels(data: bytes) -> Pixels:
    """Decode what `jpeg_bytes` made: (h, w, 1 or 3) uint8."""
    import imagecodecs

    return np.atleast_3d(imagecodecs.jpeg8_decode(data))


def write_jpeg(pixels: Pixels, metadata: Metadata, profile: bytes | None, *, quality: int | None) -> bytes:
    """Encode a JPEG with its metadata spliced in; never coarser than the JPEG that it came from.

    Args:
        pixels: (h, w, 1 or 3) uint8.
        metadata: of the source; if that was a JPEG, its segments, tables and subsampling are kept.
        profile: ICC profile to embed, or None.
        quality: 1 … 100; None takes the least quality whose tables are as fine as the source's, or 95.
    """
    facts = metadata.container if metadata.format == "jpeg" else {}
    tables = _as_tables(facts.get("tables"))
    chosen = quality if quality is not None else (_quality_for(tables) if tables else 95)
    stream = jpeg_bytes(pixels, quality=chosen, sampling=str(facts.get("sampling", "444")))
    head = 4 + int.from_bytes(stream[4:6], "big")  # SOI and the JFIF segment that the encoder wrote
    parts = _parts(metadata, facts, profile)
    density = facts.get("density")
    jfif = (
        stream[:head]
        if not isinstance(density, bytes) or len(density) != 5
        else stream[:13] + density + stream[18:head]
    )
    return jfif + b"".join(_segment(marker, payload) for marker, payload in parts) + stream[head:]


def _parts(metadata: Metadata, facts: Mapping[str, Any], profile: bytes | None) -> list[tuple[int, bytes]]:
    if facts:
        kept = facts["segments"]
        parts = [(m, p) for m, p in kept if not (m == _APP2 and p.startswith(_ICC))]
    else:
        named = ((_APP1, _EXIF, metadata.exif), (_APP1, _XMP, metadata.xmp), (_APP13, _IPTC, metadata.iptc))
        parts = [(m, head + body) for m, head, body in named if body and len(head + body) <= _BLOCK_LIMIT]
    if profile:
        room = _BLOCK_LIMIT - len(_ICC) - 2
        pieces = [profile[start : start + room] for start in range(0, len(profile), room)]
        parts += [(_APP2, _ICC + bytes([number, len(pieces)]) + piece) for number, piece in enumerate(pieces, 1)]
    return parts


def _segment(marker: int, payload: bytes) -> bytes:
    return bytes([0xFF, marker]) + (len(payload) + 2).to_bytes(2, "big") + payload


def _as_tables(blocks: object) -> dict[int, NDArray[np.int64]]:
    """Read quantisation tables by number from DQT payloads (ITU-T T.81, clause B.2.4.1)."""
    found: dict[int, NDArray[np.int64]] = {}
    for block in blocks if isinstance(blocks, tuple) else ():
        position = 0
        while position < len(block):
            wide, number = divmod(block[position], 16)
            size = 64 * (2 if wide else 1)
            raw = block[position + 1 : position + 1 + size]
            if len(raw) < size:
                break
            found[number] = np.frombuffer(raw, ">u2" if wide else "u1").astype(np.int64)
            position += 1 + size
    return found


def _quality_for(tables: Mapping[int, NDArray[np.int64]]) -> int:
    """Return the least quality at which the encoder's tables are nowhere coarser than `tables`; at most 100."""
    low, high = 1, 100
    while low < high:
        middle = (low + high) // 2
        ours = _tables_at(middle)
        fine = all((ours[min(number, 1)] <= table).all() for number, table in tables.items())
        low, high = (low, middle) if fine else (middle + 1, high)
    return low


@cache
def _tables_at(quality: int) -> dict[int, NDArray[np.int64]]:
    stream = jpeg_bytes(np.zeros((8, 8, 3), np.uint8), quality=quality)
    segments = read_segments(Path("sample"), stream)
    return _as_tables(tuple(payload for marker, payload in segments.parts if marker == _DQT))
