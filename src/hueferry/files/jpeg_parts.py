"""One JPEG stream encoded by several threads: restart markers divide it into bands.

Between restart markers nothing is remembered (ITU-T T.81, clause F.1.2.1.1 and annex E.1.4): a band of whole blocks
can be encoded as a picture of its own and its entropy-coded data put after the band above. The pixels that come out
are those of a stream encoded in one go, byte for byte, and how a picture is divided depends on its size alone.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hueferry.threads import each

_PART = 3 << 19
"""Pixels of a band, about: 24 megapixels make two groups of eight bands, one for each of two cores to verify."""

_GROUP = 8
"""Bands after which the numbers of restart markers begin anew."""

_MOST_BLOCKS = 65_535
"""Largest restart interval that a stream can state."""

_DRI, _RST0, _EOI = 0xDD, 0xD0, b"\xff\xd9"
_BLOCK = {"444": (8, 8), "422": (8, 16), "420": (16, 16)}
"""Rows and columns of a coded block (a minimum coded unit) by chroma subsampling."""


def encode_in_parts(pixels: NDArray[np.uint8], *, quality: int, sampling: str) -> bytes:
    """Encode (h, w, 3) 8-bit pixels in bands, as one stream without metadata."""
    rows, columns = _BLOCK[sampling]
    across = -(-pixels.shape[1] // columns)
    band = rows * max(1, min(_PART // (pixels.shape[1] * rows), _MOST_BLOCKS // across))
    tops = range(0, pixels.shape[0], band)
    if len(tops) == 1:
        return _encode(pixels, quality, sampling)
    streams = each(lambda top: _encode(pixels[top : top + band], quality, sampling), tops)
    return _joined(streams, pixels.shape[0], across * band // rows)


def _encode(pixels: NDArray[np.uint8], quality: int, sampling: str) -> bytes:
    import imagecodecs

    return bytes(imagecodecs.jpeg8_encode(np.ascontiguousarray(pixels), level=quality, subsampling=sampling))


def _joined(streams: list[bytes], height: int, interval: int) -> bytes:
    from hueferry.files.jpeg import read_segments

    bands = [read_segments(Path("band"), stream) for stream in streams]
    head = bytearray(streams[0][: bands[0].scan])
    frame = bytes(head).index(bands[0].frame)
    head[frame + 1 : frame + 3] = height.to_bytes(2, "big")
    pieces = [bytes(head), bytes([0xFF, _DRI, 0, 4]) + interval.to_bytes(2, "big")]
    for number, (stream, band) in enumerate(zip(streams, bands, strict=True)):
        scan = stream[band.scan : -len(_EOI)]
        pieces.append(scan if number == 0 else bytes([0xFF, _RST0 + (number - 1) % 8]) + _data_of(scan))
    return b"".join(pieces) + _EOI


def _data_of(scan: bytes) -> bytes:
    """Return the entropy-coded data behind a scan header that begins with its marker."""
    return scan[2 + int.from_bytes(scan[2:4], "big") :]


def standing_alone(stream: bytes) -> list[bytes]:
    """Cut a stream of ours into streams of eight bands, each a JPEG of its own, so that cores can verify it together.

    Every byte of entropy-coded data is in one of them. A stream without restart markers comes back whole.
    """
    from hueferry.files.jpeg import read_segments

    segments = read_segments(Path("stream"), stream)
    interval = next((int.from_bytes(payload, "big") for marker, payload in segments.parts if marker == _DRI), 0)
    rows, columns = _BLOCK[segments.sampling]
    height, width = segments.shape
    across = -(-width // columns)
    if interval == 0 or interval % across or segments.components != 3:
        return [stream]
    head_end = segments.scan + 2 + int.from_bytes(stream[segments.scan + 2 : segments.scan + 4], "big")
    frame = stream.index(segments.frame)
    tall = _GROUP * interval // across * rows
    data = stream[head_end : stream.rindex(_EOI)].split(bytes([0xFF, _RST0 + _GROUP - 1]))
    alone = []
    for number, piece in enumerate(data):
        head = bytearray(stream[:head_end])
        head[frame + 1 : frame + 3] = min(tall, height - number * tall).to_bytes(2, "big")
        alone.append(bytes(head) + piece + _EOI)
    return alone
