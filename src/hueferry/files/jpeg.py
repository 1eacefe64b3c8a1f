"""JPEG: segments read and spliced by ourselves, pixels by libjpeg-turbo."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from functools import cache
from pathlib import Path

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.jpeg_blocks import APP1, EXIF, blocks_of, first, holds_more, iptc_in, profile_in, xmp_in
from hueferry.files.jpeg_scans import check_whole, read_scans
from hueferry.files.probe import check_size
from hueferry.picture import Metadata

_SOS, _DQT, _COM = 0xDA, 0xDB, 0xFE
_APP0, _APP1, _APP14, _APP15 = 0xE0, 0xE1, 0xEE, 0xEF
_FRAMES = frozenset({*range(0xC0, 0xD0)} - {0xC4, 0xC8, 0xCC})


@attrs.frozen(eq=False)
class Segments:
    """What stands before the first scan of a JPEG stream.

    Attributes:
        parts: (marker, payload) in order.
        marker: of the frame header, which says how the picture is coded.
        frame: payload of the frame header: precision, rows, columns, components.
        scan: offset of the first scan.
    """

    parts: tuple[tuple[int, bytes], ...]
    marker: int
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
    kind, frame, position = 0, b"", 2
    for marker, payload, end in _walk(path, data):
        position = end
        if marker == _SOS:
            break
        if marker in _FRAMES:
            kind, frame = marker, payload
        parts.append((marker, payload))
    if len(frame) < 6 + 3 * (frame[5] if len(frame) > 5 else 255):
        raise PictureError(path, "the JPEG stream has no frame header; the file is broken")
    if data.rfind(b"\xff\xd9") < position:
        raise PictureError(path, "the JPEG stream ends early; copy the file again from its source")
    return Segments(tuple(parts), kind, frame, position)


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


def read_jpeg(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
    """Decode a JPEG: pixels, metadata and the ICC profile if there is one.

    Raises:
        PictureError: the stream is broken or was cut short.
        RefusedError: CMYK, more than 8 bits, or further pictures in the file that would be lost.
    """
    import imagecodecs

    segments = read_segments(path, data)
    if segments.components not in (1, 3):
        raise RefusedError(path, "this is a CMYK JPEG; convert it to RGB with its profile first")
    if segments.frame[0] != 8:
        raise RefusedError(path, f"this JPEG has {segments.frame[0]} bits a channel; save it as TIFF")
    scans = read_scans(path, data, segments.scan)
    notes = _notes(path, segments, data[scans.end + 2 :], accept_loss=accept_loss)
    check_size(path, segments.shape)
    try:
        pixels = np.atleast_3d(imagecodecs.jpeg8_decode(data))
        check_whole(path, data, pixels, scans, marker=segments.marker)
    except (imagecodecs.Jpeg8Error, ValueError, MemoryError) as error:
        raise PictureError(path, f"the JPEG stream cannot be decoded: {error}") from error
    return Decoded(pixels, _metadata(segments), profile_in(path, segments.parts), notes=notes)


def _notes(path: Path, segments: Segments, behind: bytes, *, accept_loss: bool) -> tuple[str, ...]:
    if holds_more(segments.parts, behind):
        if not accept_loss:
            reason = "the file holds a gain map or further pictures, which would be lost; accept the loss to go on"
            raise RefusedError(path, reason)
        return ("the file holds a gain map or further pictures; their loss was accepted",)
    if behind.strip(b"\0"):
        return (f"{len(behind):,} bytes behind the end of the picture were left out",)
    return ()


def _metadata(segments: Segments) -> Metadata:
    from hueferry.files.exif import orientation_of

    exif = first(segments.parts, APP1, EXIF)
    return Metadata(
        format="jpeg",
        exif=exif,
        xmp=xmp_in(segments.parts),
        iptc=iptc_in(segments.parts),
        orientation=orientation_of(exif),
        container={
            "sampling": segments.sampling,
            "tables": tuple(payload for marker, payload in segments.parts if marker == _DQT),
            "segments": tuple((m, p) for m, p in segments.parts if m == _COM or (_APP1 <= m <= _APP15 and m != _APP14)),
            "density": next((p[7:12] for m, p in segments.parts if m == _APP0 and p.startswith(b"JFIF\0")), b""),
        },
    )


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
    parts = blocks_of(metadata, facts, profile)
    density = facts.get("density")
    jfif = (
        stream[:head]
        if not isinstance(density, bytes) or len(density) != 5
        else stream[:13] + density + stream[18:head]
    )
    return jfif + b"".join(_segment(marker, payload) for marker, payload in parts) + stream[head:]


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
