"""The little of EXIF that is read: the orientation. Everything else travels byte for byte."""

from __future__ import annotations

_ORIENTATION = 0x0112
_MOST_ENTRIES = 1000


def orientation_of(exif: bytes) -> int:
    """Return the orientation 1 … 8 of an EXIF block that starts with its TIFF header; 1 if it does not say."""
    order = {b"II*\0": "little", b"MM\0*": "big"}.get(exif[:4])
    if order is None:
        return 1

    def number(start: int, size: int) -> int:
        return int.from_bytes(exif[start : start + size], "little" if order == "little" else "big")

    start = number(4, 4)
    for index in range(min(number(start, 2), _MOST_ENTRIES)):
        entry = start + 2 + 12 * index
        if number(entry, 2) == _ORIENTATION:
            value = number(entry + 8, 2)
            return value if 1 <= value <= 8 else 1
    return 1
