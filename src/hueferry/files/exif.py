"""The little of EXIF that is read or changed: orientation, time, small picture. All else travels byte for byte."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Literal

_ORIENTATION, _EXIF_POINTER, _TAKEN = 0x0112, 0x8769, 0x9003
_SMALL_START, _SMALL_LENGTH = 0x0201, 0x0202
_MOST_ENTRIES = 1000
_ALONE = b"MM\0*\0\0\0\x08\0\x01" + _ORIENTATION.to_bytes(2, "big") + b"\0\x03\0\0\0\x01"
"""A block of one entry, an orientation, up to its value."""


def orientation_of(exif: bytes) -> int:
    """Return the orientation 1 … 8 of an EXIF block that starts with its TIFF header; 1 if it does not say."""
    place = _place(exif)
    value = int.from_bytes(exif[place : place + 2], _order(exif)) if place else 1
    return value if 1 <= value <= 8 else 1


def with_orientation(exif: bytes, orientation: int) -> bytes | None:
    """Return an EXIF block that states an orientation, all other bytes as they were; None where there is no room."""
    place = _place(exif)
    if place:
        return exif[:place] + orientation.to_bytes(2, _order(exif)) + exif[place + 2 :]
    if exif:
        return exif if orientation == 1 else None
    return b"" if orientation == 1 else _ALONE + orientation.to_bytes(2, "big") + bytes(6)


def _order(exif: bytes) -> Literal["little", "big"]:
    return "little" if exif[:1] == b"I" else "big"


def taken_at(exif: bytes) -> float | None:
    """Return when a picture was taken, in seconds since 1970 by the camera's own clock; None if it does not say.

    References:
        CIPA DC-008 (Exif 2.32), tag DateTimeOriginal: "YYYY:MM:DD HH:MM:SS".
    """
    pointer = _entry(exif, _number(exif, 4, 4), _EXIF_POINTER)
    place = _entry(exif, _number(exif, pointer, 4), _TAKEN) if pointer else 0
    start = _number(exif, place, 4) if place else len(exif)
    try:
        moment = datetime.strptime(exif[start : start + 19].decode("ascii"), "%Y:%m:%d %H:%M:%S")
    except ValueError:
        return None
    return moment.replace(tzinfo=UTC).timestamp()


def _place(exif: bytes) -> int:
    """Return where the orientation stands, or 0."""
    return _entry(exif, _number(exif, 4, 4), _ORIENTATION)


def _entry(exif: bytes, start: int, tag: int) -> int:
    """Return where the value of a tag of the directory at `start` stands, or 0."""
    if exif[:4] not in (b"II*\0", b"MM\0*"):
        return 0
    for index in range(min(_number(exif, start, 2), _MOST_ENTRIES)):
        entry = start + 2 + 12 * index
        if _number(exif, entry, 2) == tag:
            return entry + 8 if entry + 10 <= len(exif) else 0
    return 0


def _number(exif: bytes, start: int, size: int) -> int:
    return int.from_bytes(exif[start : start + size], _order(exif))


def without_thumbnail(exif: bytes) -> bytes:
    """Return an EXIF block whose small picture of the uncorrected colours is gone; other bytes stay where they were.

    The link to the directory of the small picture is cut and its JPEG data are blanked, so that no offset elsewhere in
    the block, also in makers' notes, is moved (Exif 3.0, clause 4.5.4).
    """
    if exif[:4] not in (b"II*\0", b"MM\0*"):
        return exif
    order = _order(exif)
    first = int.from_bytes(exif[4:8], order)
    link = first + 2 + 12 * int.from_bytes(exif[first : first + 2], order)
    second = int.from_bytes(exif[link : link + 4], order)
    if link + 4 > len(exif) or not 8 <= second < len(exif):
        return exif
    block = bytearray(exif)
    places = (_entry(exif, second, tag) for tag in (_SMALL_START, _SMALL_LENGTH))
    start, length = (_number(exif, place, 4) if place else 0 for place in places)
    if start >= 8 and start + length <= len(exif) and exif[start : start + 2] == b"\xff\xd8":
        block[start : start + length] = bytes(length)
    block[link : link + 4] = bytes(4)
    return bytes(block)
