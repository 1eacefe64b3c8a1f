"""What the first bytes of a file announce. Names are not asked; nothing is decoded."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

HEAD = 4096
"""Bytes that are looked at."""

_HEVC = frozenset({b"heic", b"heix", b"heim", b"heis", b"hevc", b"hevx", b"hevm", b"hevs", b"heif", b"mif1", b"msf1"})
_TIFF_HEADS = (b"II*\0", b"MM\0*", b"II+\0", b"MM\0+")
_RAW_HEADS = (b"IIU\0", b"IIRO", b"IIRS", b"MMOR", b"\0MRM", b"FOVb", b"II\x1a\0\0\0HEAPCCDR")
_DNG_VERSION, _SUBFILE, _MAKE, _SUB_IFDS = 50706, 254, 271, 330
_MOST_ENTRIES = 300


def starts(*heads: bytes) -> Callable[[bytes], bool]:
    """Return a check whether a file begins with one of `heads`."""
    return lambda head: head.startswith(heads)


def is_webp(head: bytes) -> bool:
    """RFC 9649, clause 2.4."""
    return head[:4] == b"RIFF" and head[8:12] == b"WEBP"


def is_bitmap(head: bytes) -> bool:
    """A bitmap file header: the letters, and two reserved words that are zero."""
    return head[:2] == b"BM" and len(head) >= 18 and head[6:10] == bytes(4) and 12 <= head[14] <= 124


def _brands(head: bytes) -> frozenset[bytes]:
    """Return the brands of an ISO base media file, the major one among them (ISO/IEC 14496-12, clause 4.3)."""
    if head[4:8] != b"ftyp":
        return frozenset()
    body = head[8 : min(int.from_bytes(head[:4], "big"), 512)]
    return frozenset(body[start : start + 4] for start in range(0, len(body) - 3, 4) if start != 4)


def is_avif(head: bytes) -> bool:
    """ISO base media with a brand of AV1 images (AV1 Image File Format 1.1, clause 6)."""
    return bool(_brands(head) & {b"avif", b"avis"})


def is_heic(head: bytes) -> bool:
    """ISO base media with a brand of HEVC images, or the bare one of images (ISO/IEC 23008-12, annex B)."""
    return not is_avif(head) and bool(_brands(head) & _HEVC)


def is_raw(head: bytes) -> bool:
    """The usual containers of sensor data: their own heads, and TIFFs whose first page is a preview or a negative."""
    if head.startswith(_RAW_HEADS) or head[8:16] == b"CCD-RAW " or b"crx " in _brands(head):
        return True
    if head[8:10] == b"CR" and head[:4] == b"II*\0":
        return True
    tags = _first_tags(head)
    preview = tags.get(_SUBFILE, 0) & 1
    return _DNG_VERSION in tags or bool(preview and _MAKE in tags and _SUB_IFDS in tags)


def is_tiff(head: bytes) -> bool:
    """TIFF 6.0 or BigTIFF, unless it holds sensor data."""
    return head.startswith(_TIFF_HEADS) and not is_raw(head)


def _first_tags(head: bytes) -> Mapping[int, int]:
    """Read tags and their values, as far as they fit four bytes, of the first directory of a classic TIFF."""
    order = {b"II*\0": "little", b"MM\0*": "big"}.get(head[:4])
    if order is None:
        return MappingProxyType({})

    def number(start: int, size: int) -> int:
        return int.from_bytes(head[start : start + size], "little" if order == "little" else "big")

    start = number(4, 4)
    entries = range(start + 2, min(start + 2 + 12 * min(number(start, 2), _MOST_ENTRIES), len(head) - 11), 12)
    return MappingProxyType({number(at, 2): number(at + 8, 2 if number(at + 2, 2) == 3 else 4) for at in entries})


def is_drawing(head: bytes) -> bool:
    """An XML document whose root is an SVG element; comments, prologue and byte order mark may stand before it."""
    text = head.removeprefix(b"\xef\xbb\xbf").lstrip()
    return text.startswith((b"<svg", b"<?xml", b"<!--", b"<!DOCTYPE svg")) and b"<svg" in text


def is_page(head: bytes) -> bool:
    """A PDF, whose mark may stand anywhere in the first kilobyte (ISO 32000-2, annex I)."""
    return b"%PDF-" in head[:1024]
