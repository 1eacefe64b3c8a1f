"""Exposure metadata as a witness: how much light the camera let in, by its own word."""

from __future__ import annotations

import struct
from collections.abc import Iterator
from math import isfinite, log2

_EXIF_POINTER, _TIME, _F_NUMBER, _ISO = 0x8769, 0x829A, 0x829D, 0x8827
_SHORT, _LONG, _RATIONAL = 3, 4, 5
_MOST_ENTRIES = 512


def exposure_value(exif: bytes) -> float | None:
    """Return the exposure value at ISO 100 in stops, or None where time, f-number and ISO are not all there.

    One more means half the light on the sensor for the same scene, once the ISO gain is counted in.

    Args:
        exif: a block that starts with the TIFF header, hostile or empty; anything odd in it gives None.

    References:
        CIPA DC-008 (Exif 2.32), tags ExposureTime, FNumber, PhotographicSensitivity; ISO 2720 for the exposure value.
    """
    try:
        fields = dict(_fields(exif))
    except (struct.error, IndexError, ZeroDivisionError):
        return None
    time, f_number, iso = fields.get(_TIME, 0.0), fields.get(_F_NUMBER, 0.0), fields.get(_ISO, 0.0)
    if min(time, f_number, iso) <= 0:
        return None
    value = log2(f_number**2 / time) - log2(iso / 100)
    return value if isfinite(value) and abs(value) < 40 else None


def _fields(exif: bytes) -> Iterator[tuple[int, float]]:
    """Yield the tags of the first directory and of the Exif directory it points to, as single numbers."""
    if exif[:4] not in (b"II*\0", b"MM\0*"):
        return
    order = "<" if exif[:2] == b"II" else ">"
    first = dict(_directory(exif, order, struct.unpack_from(order + "I", exif, 4)[0]))
    yield from first.items()
    if _EXIF_POINTER in first:
        yield from _directory(exif, order, int(first[_EXIF_POINTER]))


def _directory(exif: bytes, order: str, offset: int) -> Iterator[tuple[int, float]]:
    count = min(struct.unpack_from(order + "H", exif, offset)[0], _MOST_ENTRIES)
    for entry in range(count):
        tag, kind, _ = struct.unpack_from(order + "HHI", exif, offset + 2 + 12 * entry)
        at = offset + 2 + 12 * entry + 8
        if kind == _SHORT:
            yield tag, float(struct.unpack_from(order + "H", exif, at)[0])
        elif kind == _LONG:
            yield tag, float(struct.unpack_from(order + "I", exif, at)[0])
        elif kind == _RATIONAL:
            top, bottom = struct.unpack_from(order + "II", exif, struct.unpack_from(order + "I", exif, at)[0])
            yield tag, top / bottom if bottom else 0.0
