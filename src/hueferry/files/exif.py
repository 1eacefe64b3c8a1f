"""The little of EXIF that is read: the orientation. Everything else travels byte for byte."""

from __future__ import annotations

from typing import Literal

_ORIENTATION = 0x0112
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


def _place(exif: bytes) -> int:
    """Return where the orientation stands, or 0."""
    if exif[:4] not in (b"II*\0", b"MM\0*"):
        return 0

    def number(start: int, size: int) -> int:
        return int.from_bytes(exif[start : start + size], _order(exif))

    start = number(4, 4)
    for index in range(min(number(start, 2), _MOST_ENTRIES)):
        entry = start + 2 + 12 * index
        if number(entry, 2) == _ORIENTATION:
            return entry + 8 if entry + 10 <= len(exif) else 0
    return 0
