"""IPTC: the bare block (IIM) that TIFF keeps in a tag of its own and JPEG in a list of image resources."""

from __future__ import annotations

from collections.abc import Iterator

_SIGN = b"8BIM"
_IIM = 0x0404
"""Number of the resource that is the IPTC block (IPTC-IIM 4, as embedded in APP13 segments)."""


def iptc_of(resources: bytes) -> bytes:
    """Return the IPTC block in a list of image resources, or nothing."""
    return next((body for number, body in _resources(resources) if number == _IIM), b"")


def as_resources(iptc: bytes) -> bytes:
    """Return a list of image resources that holds an IPTC block alone; the inverse of `iptc_of`."""
    return _SIGN + _IIM.to_bytes(2, "big") + b"\0\0" + len(iptc).to_bytes(4, "big") + iptc + b"\0" * (len(iptc) % 2)


def _resources(data: bytes) -> Iterator[tuple[int, bytes]]:
    """Read signature, number, padded name, length and padded body of every resource until one makes no sense."""
    position = 0
    while data[position : position + 4] == _SIGN and position + 12 <= len(data):
        number = int.from_bytes(data[position + 4 : position + 6], "big")
        named = 1 + data[position + 6]
        start = position + 6 + named + named % 2 + 4
        length = int.from_bytes(data[start - 4 : start], "big")
        if start > len(data) or start + length > len(data):
            return
        yield number, data[start : start + length]
        position = start + length + length % 2
