"""How far a JPEG stream really goes: where its scans end, what they state, and whether their data are all there.

A decoder fills what is missing with gray and says so in a warning that its bindings do not pass on. So we ask it in
another way: bytes put before the end mark change nothing in a stream whose data are complete, for the decoder has all
it needs before it comes to them (ITU-T T.81, clause E.2.3), and change pixels where data are missing.
"""

from __future__ import annotations

import re
from pathlib import Path

import attrs
import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError

_MARK = re.compile(rb"\xff[^\x00\xd0-\xd7\xff]", re.DOTALL)
"""A marker that ends entropy-coded data: neither a stuffed zero nor a restart nor filling."""

_EOI, _SOS, _PROGRESSIVE = 0xD9, 0xDA, frozenset({0xC2, 0xC6, 0xCA, 0xCE})
_PROBE = bytes.fromhex("a5375a1be24d936cb81e71c4") * 32
_GRAY = 1.6
"""How far the luma of a pixel may be from 128 to be suspected of standing for missing data."""


@attrs.frozen
class Scans:
    """The scans of a stream.

    Attributes:
        headers: payloads of their headers.
        end: offset of the end mark.
    """

    headers: tuple[bytes, ...]
    end: int


def read_scans(path: Path, data: bytes, first: int) -> Scans:
    """Walk from the first scan, whose marker is at `first`, to the end mark of the same picture.

    Raises:
        PictureError: there is no end mark.
    """
    headers: list[bytes] = []
    position = first
    while position + 4 <= len(data):
        marker, length = data[position + 1], int.from_bytes(data[position + 2 : position + 4], "big")
        if marker == _SOS:
            headers.append(data[position + 4 : position + 2 + length])
        found = _MARK.search(data, position + 2 + length)
        if found is None:
            break
        position = found.start()
        if data[position + 1] == _EOI:
            return Scans(tuple(headers), position)
    raise PictureError(path, "the JPEG stream ends early; copy the file again from its source")


def check_whole(path: Path, data: bytes, pixels: Pixels, scans: Scans, *, marker: int) -> None:
    """Refuse a stream that was cut short and given an end mark.

    Where the last pixel of a sequential stream is not gray, no more than its last few blocks can be missing, and the
    second decoding is saved. A progressive stream is always decoded twice, and its scans have to refine every
    coefficient to the last bit.

    Args:
        path: for messages.
        data: the file.
        pixels: what it was decoded to.
        scans: of the file.
        marker: the second byte of the frame header's marker, which tells progressive from sequential.

    Raises:
        PictureError: data are missing.
    """
    progressive = marker in _PROGRESSIVE
    if progressive and not _refines_all(scans.headers):
        raise PictureError(path, "the JPEG stream lacks its last scans; copy the file again from its source")
    if not progressive and not _is_gray(pixels):
        return
    import imagecodecs

    probed = np.atleast_3d(imagecodecs.jpeg8_decode(data[: scans.end] + _PROBE + b"\xff\xd9"))
    if not np.array_equal(probed, pixels):
        raise PictureError(path, "the JPEG stream ends early, before its end mark; copy the file again from its source")


def _is_gray(pixels: Pixels) -> bool:
    last = pixels[-1, -1].astype(np.float64)
    luma = last @ (0.299, 0.587, 0.114) if last.size == 3 else last[0]
    return bool(abs(luma - 128) <= _GRAY)


def _refines_all(headers: tuple[bytes, ...]) -> bool:
    """Whether scans bring DC and AC of every component that they name down to the lowest bit (clause G.1.1.1)."""
    exact: set[tuple[int, int]] = set()
    named: set[int] = set()
    for header in headers:
        count = header[0] if header else 0
        if len(header) < 4 + 2 * count:
            return False
        start, end, low = header[1 + 2 * count], header[2 + 2 * count], header[3 + 2 * count] & 15
        components = header[1 : 1 + 2 * count : 2]
        named.update(components)
        if low == 0:
            exact.update((one, index) for one in components for index in range(start, min(end, 63) + 1))
    return all((one, index) in exact for one in named for index in range(64))
