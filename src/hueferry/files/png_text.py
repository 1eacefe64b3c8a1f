"""Texts in PNG: XMP as it is or compressed, unpacked within a limit."""

from __future__ import annotations

import zlib
from pathlib import Path

from hueferry.errors import PictureError

MOST_UNPACKED = 64 << 20
"""Bytes of the largest profile or text that is unpacked."""

_XMP = b"XML:com.adobe.xmp\0"
_OLD_XMP = b"Raw profile type xmp\0"
"""Keyword under which older writers keep XMP in a zTXt or tEXt chunk, in hexadecimal digits behind three lines."""


def unpacked(path: Path, packed: bytes, what: str) -> bytes:
    """Return what a zlib stream holds.

    Raises:
        PictureError: it is broken, cut short, or holds more than `MOST_UNPACKED` bytes.
    """
    unpacker = zlib.decompressobj()
    try:
        plain = unpacker.decompress(packed, MOST_UNPACKED)
    except zlib.error as error:
        raise PictureError(path, f"the embedded {what} cannot be unpacked: {error}") from error
    if not unpacker.eof:
        more = len(plain) >= MOST_UNPACKED
        reason = f"is larger than {MOST_UNPACKED >> 20} MB when it is unpacked" if more else "ends early"
        raise PictureError(path, f"the embedded {what} {reason}; save the picture without it")
    return plain


def xmp_of(path: Path, chunks: list[tuple[bytes, bytes]]) -> bytes:
    """Return the XMP packet, from an iTXt chunk, compressed or not, or from an older writer's zTXt or tEXt chunk.

    Raises:
        PictureError: it is compressed and cannot be unpacked.
    """
    for kind, body in chunks:
        if kind == b"iTXt" and body.startswith(_XMP):
            return _international(path, body[len(_XMP) :])
    for kind, body in chunks:
        if kind in (b"zTXt", b"tEXt") and body.startswith(_OLD_XMP):
            text = body[len(_OLD_XMP) :]
            return _from_digits(unpacked(path, text[1:], "XMP") if kind == b"zTXt" else text)
    return b""


def _international(path: Path, body: bytes) -> bytes:
    """Return the text behind flag, method, language and translated keyword (PNG, third edition, clause 11.3.3.4)."""
    parts = body[2:].split(b"\0", 2)
    if len(parts) < 3:
        return b""
    return unpacked(path, parts[2], "XMP") if body[:1] == b"\1" else parts[2]


def _from_digits(text: bytes) -> bytes:
    """Read a name, a count of bytes and hexadecimal digits; nothing where they are something else."""
    lines = text.strip().split(b"\n", 2)
    try:
        plain = bytes.fromhex(lines[2].decode("ascii")) if len(lines) == 3 else b""
        return plain if len(plain) == int(lines[1]) else b""
    except (ValueError, UnicodeDecodeError):
        return b""


def xmp_body(xmp: bytes) -> bytes:
    """Return the body of an iTXt chunk that holds an XMP packet as it is."""
    return _XMP + b"\0\0\0\0" + xmp
