"""JPEG XL by libjxl: 8 and 16 bits and float, with profile, EXIF and XMP.

The turn that a viewer makes is in the stream, not in EXIF, and the decoder makes it (ISO/IEC 18181-1, annex D): pixels
come upright and are written upright.
"""

from __future__ import annotations

from pathlib import Path

import attrs
import numpy as np

from hueferry.errors import InputError, PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.isobmff import boxes
from hueferry.files.probe import check_size
from hueferry.picture import Metadata, Picture

BARE, CONTAINER = b"\xff\x0a", b"\0\0\0\x0cJXL \r\n\x87\n"
_RATIOS = ((1, 1), (6, 5), (4, 3), (3, 2), (16, 9), (5, 4), (2, 1))
_SIDES = ((9, 1), (13, 1), (18, 1), (30, 1))
_PREVIEW_SIDES = ((6, 1), (8, 65), (10, 321), (12, 1345))
_PREVIEW_EIGHTHS = ((0, 16), (0, 32), (5, 1), (9, 33))
_TICKS = (
    ((0, 100), (0, 1000), (10, 1), (30, 1)),
    ((0, 1), (0, 1001), (8, 1), (10, 1)),
    ((0, 0), (3, 0), (16, 0), (32, 0)),
)
"""Numerator and denominator of ticks a second, and loops."""

_COARSEST = 14.9
"""Largest distance that is asked for; beyond 15 the binding takes it for a quality."""


@attrs.frozen
class Head:
    """What the first bits of a stream say.

    Attributes:
        shape: rows and columns of what the stream holds, before it is turned.
        film: whether frames follow each other in time.
        floating: whether samples are floating point.
    """

    shape: tuple[int, int]
    film: bool = False
    floating: bool = False


class _Bits:
    """Bits of a stream, the lowest of each byte first; beyond the end they are zero."""

    def __init__(self, data: bytes) -> None:
        self.value, self.at = int.from_bytes(data, "little"), 0

    def take(self, count: int) -> int:
        self.at += count
        return self.value >> (self.at - count) & ((1 << count) - 1)

    def choose(self, ways: tuple[tuple[int, int], ...]) -> int:
        """Read a number in one of four ways, each a count of bits and what is added (annex B.2.1)."""
        count, offset = ways[self.take(2)]
        return offset + self.take(count)


def read_head(codestream: bytes) -> Head:
    """Read size, animation and kind of sample from the first bits of a stream (ISO/IEC 18181-1, annex D.2 and D.3)."""
    bits = _Bits(codestream[2:96])
    shape = _size(bits)
    if bits.take(1):
        return Head(shape)
    film = bool(bits.take(1)) and _further(bits)
    return Head(shape, film, floating=bool(bits.take(1)))


def _further(bits: _Bits) -> bool:
    """Pass over turn, size when shown and preview; return whether there is an animation, and pass over its facts."""
    bits.take(3)
    if bits.take(1):
        _size(bits)
    if bits.take(1):
        _preview(bits)
    if not bits.take(1):
        return False
    for ways in _TICKS:
        bits.choose(ways)
    bits.take(1)
    return True


def _size(bits: _Bits) -> tuple[int, int]:
    small = bits.take(1)
    rows = 8 * (1 + bits.take(5)) if small else bits.choose(_SIDES)
    ratio = bits.take(3)
    if ratio:
        across, down = _RATIOS[ratio - 1]
        return rows, rows * across // down
    return rows, 8 * (1 + bits.take(5)) if small else bits.choose(_SIDES)


def _preview(bits: _Bits) -> None:
    ways = _PREVIEW_EIGHTHS if bits.take(1) else _PREVIEW_SIDES
    bits.choose(ways)
    if not bits.take(3):
        bits.choose(ways)


def read_jxl(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
    """Decode a JPEG XL, upright: 8 bits as 8, more as 16, float as float.

    Raises:
        PictureError: the file is broken.
        RefusedError: a film or a gain map that would be lost.
    """
    import pyjpegxl

    kinds, codestream = _parts(path, data)
    head = read_head(codestream)
    if not accept_loss and head.film:
        raise RefusedError(
            path, "this JPEG XL is a film, and all frames but one would be lost; accept the loss to go on"
        )
    if not accept_loss and b"jhgm" in kinds:
        raise RefusedError(path, "the file holds a gain map, which would be lost; accept the loss to go on")
    check_size(path, head.shape)
    try:
        found, pixels = pyjpegxl.decode_to_numpy(data, dtype="float32" if head.floating else None)
    except (RuntimeError, ValueError, MemoryError) as error:
        raise PictureError(path, f"the JPEG XL cannot be decoded: {error}") from error
    metadata = Metadata(format="jxl", exif=_exif(found.exif or b""), xmp=found.xmp or b"")
    notes = ("its provenance record (JUMBF) is not carried over",) if b"jumb" in kinds else ()
    return Decoded(np.atleast_3d(pixels), metadata, found.icc or None, notes=notes)


def _parts(path: Path, data: bytes) -> tuple[frozenset[bytes], bytes]:
    """Return the kinds of boxes and the first part of the stream (ISO/IEC 18181-2, clause 9)."""
    if data.startswith(BARE):
        return frozenset(), data
    try:
        held = list(boxes(data))
    except InputError as error:
        raise PictureError(path, f"the JPEG XL is broken: {error}") from error
    stream = next((body[4 * (kind == b"jxlp") :] for kind, body, _ in held if kind in (b"jxlc", b"jxlp")), b"")
    if not stream.startswith(BARE):
        raise PictureError(path, "the JPEG XL holds no picture; the file is broken")
    return frozenset(kind for kind, _, _ in held), stream


def _exif(box: bytes) -> bytes:
    """Return the EXIF block of a box, which begins with how far off the block is (ISO/IEC 18181-2, clause 9.4).

    The stream's own turn was made: what the block says of it is to be ignored here, and would be heeded elsewhere.
    """
    from hueferry.files.exif import with_orientation

    return with_orientation(box[4 + int.from_bytes(box[:4], "big") :], 1) or b""


def write_jxl(picture: Picture, profile: bytes | None, *, quality: int | None) -> bytes:
    """Encode a JPEG XL; lossless unless a quality is given.

    Args:
        picture: 8 or 16 bits or float, upright.
        profile: ICC profile to embed.
        quality: 1 … 99; None and 100 are lossless.
    """
    import pyjpegxl

    lossless = quality is None or quality >= 100
    return bytes(
        pyjpegxl.encode_from_numpy(
            np.ascontiguousarray(picture.pixels),
            lossless=lossless,
            quality=0.0 if quality is None or lossless else distance_of(quality),
            # For lossless pictures three more levels of effort take five times as long for two in a hundred bytes.
            speed=pyjpegxl.EncoderSpeed.Falcon if lossless else pyjpegxl.EncoderSpeed.Hare,
            exif=bytes(4) + picture.metadata.exif if picture.metadata.exif else None,
            xmp=picture.metadata.xmp or None,
            icc=profile,
        )
    )


def distance_of(quality: int) -> float:
    """Return the distance, in just noticeable differences, that a quality of 1 … 99 stands for: 1 at 90."""
    return min(0.1 + 0.09 * (100 - quality), _COARSEST)
