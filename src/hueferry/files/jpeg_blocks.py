"""Metadata in JPEG segments: blocks beyond 64 KB are cut into pieces and joined again, as their standards say."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from hueferry.errors import InputError, PictureError
from hueferry.files.iptc import as_resources, iptc_of
from hueferry.picture import Metadata

Part = tuple[int, bytes]

APP1, APP2, APP13 = 0xE1, 0xE2, 0xED
EXIF, XMP, IPTC = b"Exif\0\0", b"http://ns.adobe.com/xap/1.0/\0", b"Photoshop 3.0\0"
ICC, MULTI, GAIN = b"ICC_PROFILE\0", b"MPF\0", b"urn:iso:std:iso:ts:21496:-1\0"
BLOCK_LIMIT = 65_533
MOST_EXIF = BLOCK_LIMIT - len(EXIF)
_MORE_XMP = b"http://ns.adobe.com/xmp/extension/\0"
_GAIN_SIGNS = (b"http://ns.adobe.com/hdr-gain-map/1.0/", b'Semantic="GainMap"', b"HDRGainMap")


def first(parts: Iterable[Part], marker: int, head: bytes) -> bytes:
    """Return the body of the first segment of a kind, or nothing."""
    return next((p[len(head) :] for m, p in parts if m == marker and p.startswith(head)), b"")


def iptc_in(parts: Iterable[Part]) -> bytes:
    """Return the IPTC block in the image resources, which may go on over several segments."""
    return iptc_of(b"".join(p[len(IPTC) :] for m, p in parts if m == APP13 and p.startswith(IPTC)))


def profile_in(path: Path, parts: Iterable[Part]) -> bytes | None:
    """Join the numbered pieces of an ICC profile (ICC.1:2022, annex B.4).

    Raises:
        PictureError: a piece is missing.
    """
    pieces = sorted((p[12], p[13], p[14:]) for m, p in parts if m == APP2 and p.startswith(ICC) and len(p) > 14)
    if not pieces:
        return None
    if [number for number, _, _ in pieces] != list(range(1, pieces[0][1] + 1)):
        raise PictureError(path, "a piece of its colour profile is missing; export the picture again with its profile")
    return b"".join(piece for _, _, piece in pieces)


def xmp_in(parts: tuple[Part, ...]) -> bytes:
    """Return the XMP packet; the whole of it where the first segment only points to the pieces that follow."""
    main = first(parts, APP1, XMP)
    more = _extension(parts)
    return more if more and main == _pointer(more) else main


def _extension(parts: Iterable[Part]) -> bytes:
    """Join the pieces of an extended XMP packet (XMP specification, part 3, clause 1.1.3.1); nothing if one lacks."""
    found = [p[len(_MORE_XMP) :] for m, p in parts if m == APP1 and p.startswith(_MORE_XMP) and len(p) > 75]
    pieces = sorted((int.from_bytes(piece[36:40], "big"), piece[40:]) for piece in found)
    whole = b"".join(piece for _, piece in pieces)
    return whole if found and len(whole) == int.from_bytes(found[0][32:36], "big") else b""


def _digest(packet: bytes) -> bytes:
    return hashlib.md5(packet, usedforsecurity=False).hexdigest().upper().encode()


def _pointer(packet: bytes) -> bytes:
    """Return the XMP packet that says where a longer one is."""
    return (
        b'<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">'
        b'<rdf:Description rdf:about="" xmlns:xmpNote="http://ns.adobe.com/xmp/note/" xmpNote:HasExtendedXMP="'
        + _digest(packet)
        + b'"/></rdf:RDF></x:xmpmeta>'
    )


def holds_more(parts: Iterable[Part], behind: bytes) -> bool:
    """Whether a file says that it holds a gain map or further pictures, or has them behind its own."""
    kept = tuple(parts)
    signs = any(m == APP2 and p.startswith((MULTI, GAIN)) for m, p in kept)
    packets = [p for m, p in kept if m == APP1 and p.startswith((XMP, _MORE_XMP))]
    named = any(sign in packet for packet in packets for sign in _GAIN_SIGNS)
    return signs or named or b"\xff\xd8\xff" in behind or re.match(rb"....ftyp", behind, re.DOTALL) is not None


def blocks_of(metadata: Metadata, facts: Mapping[str, Any], profile: bytes | None) -> list[Part]:
    """Return the segments of a written file: those of a JPEG source as they were, those of other sources anew.

    Raises:
        InputError: the profile is too large for the format.
    """
    if facts:
        parts = [
            _renewed(m, p, metadata) for m, p in facts["segments"] if not (m == APP2 and p.startswith(_STATED_ANEW))
        ]
        if metadata.exif and not any(m == APP1 and p.startswith(EXIF) for m, p in parts):
            parts = [(APP1, EXIF + metadata.exif), *parts]
    else:
        parts = [(APP1, EXIF + metadata.exif)] if metadata.exif and fits_exif(metadata.exif) else []
        parts += _xmp_parts(metadata.xmp)
        parts += _cut(APP13, IPTC, as_resources(metadata.iptc)) if metadata.iptc else []
    return parts + (_profile_parts(profile) if profile else [])


_STATED_ANEW = (ICC, MULTI, GAIN)


def fits_exif(exif: bytes) -> bool:
    """Whether an EXIF block fits in its segment; it cannot be cut."""
    return len(exif) <= MOST_EXIF


def _renewed(marker: int, payload: bytes, metadata: Metadata) -> Part:
    renew = marker == APP1 and payload.startswith(EXIF) and metadata.exif and fits_exif(metadata.exif)
    return (marker, EXIF + metadata.exif) if renew else (marker, payload)


def _cut(marker: int, head: bytes, body: bytes) -> list[Part]:
    room = BLOCK_LIMIT - len(head)
    return [(marker, head + body[start : start + room]) for start in range(0, len(body), room)]


def _xmp_parts(xmp: bytes) -> list[Part]:
    if not xmp:
        return []
    if len(XMP + xmp) <= BLOCK_LIMIT:
        return [(APP1, XMP + xmp)]
    room = BLOCK_LIMIT - len(_MORE_XMP) - 40
    head = _MORE_XMP + _digest(xmp) + len(xmp).to_bytes(4, "big")
    pieces = [(APP1, head + start.to_bytes(4, "big") + xmp[start : start + room]) for start in range(0, len(xmp), room)]
    return [(APP1, XMP + _pointer(xmp)), *pieces]


def _profile_parts(profile: bytes) -> list[Part]:
    room = BLOCK_LIMIT - len(ICC) - 2
    pieces = [profile[start : start + room] for start in range(0, len(profile), room)]
    if len(pieces) > 255:
        raise InputError("the colour profile is larger than the 16 MB that a JPEG can hold; write TIFF instead")
    return [(APP2, ICC + bytes([number, len(pieces)]) + piece) for number, piece in enumerate(pieces, 1)]
