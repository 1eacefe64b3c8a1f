"""What a picture is, and the seams through which pixels come and go."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Protocol

import attrs
import numpy as np

from hueferry.arrays import Codes, Pixels, Xyz
from hueferry.errors import InputError


class Encoding(Protocol):
    """How code values stand for colour. Implementations are immutable and may be used by any thread.

    XYZ is that of the ICC profile connection space: D50 adapted, Y = 1 for the encoding's white.
    """

    @property
    def name(self) -> str:
        """Short name for people, such as "sRGB" or the profile's own description."""
        ...

    @property
    def profile(self) -> bytes | None:
        """The ICC profile that a written picture carries, byte for byte; None if the picture came without one."""
        ...

    def to_xyz(self, codes: Codes) -> Xyz:
        """Turn (n, 3) codes into XYZ; codes beyond 0 … 1 are extrapolated where the formula allows."""
        ...

    def from_xyz(self, xyz: Xyz) -> Codes:
        """Turn (n, 3) XYZ into codes, not clipped; the inverse of `to_xyz` within 1e-6 inside the gamut."""
        ...


@attrs.frozen(eq=True, hash=False)
class EncodingKey:
    """An encoding as the key of a cache: two are the same if they are one object."""

    encoding: Encoding = attrs.field(eq=id)

    def __hash__(self) -> int:
        return id(self.encoding)


@attrs.frozen
class Window:
    """A rectangle of a picture, in pixels: rows top … top + height, columns left … left + width."""

    top: int = attrs.field(validator=attrs.validators.ge(0))
    left: int = attrs.field(validator=attrs.validators.ge(0))
    height: int = attrs.field(validator=attrs.validators.ge(1))
    width: int = attrs.field(validator=attrs.validators.ge(1))


def strips(shape: tuple[int, int], rows: int) -> Iterator[Window]:
    """Cut a picture of `shape` (rows, columns) into full-width windows of at most `rows` rows, from the top."""
    height, width = shape
    for top in range(0, height, rows):
        yield Window(top, 0, min(rows, height - top), width)


def _frozen(mapping: Mapping[str, object]) -> Mapping[str, object]:
    return MappingProxyType(dict(mapping))


@attrs.frozen
class Metadata:
    """What a file says besides its pixels, byte for byte.

    Attributes:
        format: the container, in lower case: "jpeg", "png", "tiff", "webp", …
        exif: the EXIF block without any container prefix (starts with the TIFF header), or empty.
        xmp: the XMP packet, or empty.
        iptc: the IPTC-IIM block, or empty.
        orientation: EXIF orientation 1 … 8. Pixels are kept as stored and the tag travels with them.
        container: facts a writer needs to re-encode no worse than the source (quantisation tables, subsampling,
            compression, resolution), named by the reader of that format.
    """

    format: str = ""
    exif: bytes = b""
    xmp: bytes = b""
    iptc: bytes = b""
    orientation: int = 1
    container: Mapping[str, object] = attrs.field(factory=dict, converter=_frozen)


def _native(array: Pixels) -> Pixels:
    view = np.ascontiguousarray(array).view()
    view.flags.writeable = False
    return view


@attrs.frozen(eq=False)
class Picture:
    """One image with its encoding, depth and metadata.

    Attributes:
        pixels: (height, width, channels) uint8, uint16 or float32, as stored in the file; read-only.
        encoding: how code values stand for colour. Gray pictures use the encoding's neutral axis.
        metadata: everything else the file said.
        bits: significant bits a channel (10 or 12 in a 16-bit container); the code range is 0 … 2**bits − 1 for
            integers and 0 … 1 for float.
        path: where it was read, or None.
        notes: sentences for the record, such as "no profile: taken as sRGB".
    """

    pixels: Pixels = attrs.field(converter=_native)
    encoding: Encoding
    metadata: Metadata = attrs.field(factory=Metadata)
    bits: int = 8
    path: Path | None = None
    notes: tuple[str, ...] = ()

    @pixels.validator
    def _check_pixels(self, _: object, value: Pixels) -> None:
        if value.ndim != 3 or value.shape[2] not in (1, 2, 3, 4) or 0 in value.shape:
            raise InputError(f"pixels must be (height, width, 1 … 4), not {value.shape}")
        if value.dtype not in (np.uint8, np.uint16, np.float32):
            raise InputError(f"pixels must be uint8, uint16 or float32, not {value.dtype}")

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns, as stored."""
        return int(self.pixels.shape[0]), int(self.pixels.shape[1])

    @property
    def has_alpha(self) -> bool:
        """Whether the last channel is alpha."""
        return self.pixels.shape[2] in (2, 4)

    @property
    def is_gray(self) -> bool:
        """Whether there is one colour channel only."""
        return int(self.pixels.shape[2]) <= 2

    @property
    def top_code(self) -> float:
        """The code that stands for 1: 255, 65535, 1023, … or 1.0 for float."""
        return 1.0 if self.pixels.dtype == np.float32 else float(2**self.bits - 1)

    def read(self, window: Window) -> Pixels:
        """Return the pixels of `window`: a picture in memory is its own `PictureSource`."""
        rows = slice(window.top, window.top + window.height)
        return self.pixels[rows, window.left : window.left + window.width]


class PictureSource(Protocol):
    """Pixels on demand. Two workers may read at once; the same window gives the same bytes every time."""

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns at full size."""
        ...

    @property
    def encoding(self) -> Encoding:
        """How code values stand for colour."""
        ...

    @property
    def bits(self) -> int:
        """Significant bits a channel."""
        ...

    def read(self, window: Window) -> Pixels:
        """Return (height, width, channels) in the file's own dtype."""
        ...


class PictureSink(Protocol):
    """Takes windows in any order, each exactly once, and shows a file only when all of them are there."""

    def write(self, window: Window, pixels: Pixels) -> None:
        """Store the pixels of one window."""
        ...

    def close(self) -> Path:
        """Verify, give the file its name and return it."""
        ...
