"""What AVIF and HEIC have in common: colours by profile or numbers, metadata, and what one picture cannot carry on."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import attrs

from hueferry.errors import RefusedError
from hueferry.files.isobmff import Items, boxes
from hueferry.picture import Encoding

XMP_TYPE = b"application/rdf+xml"
UNSPECIFIED = 2
"""Of primaries, transfer and matrix (ITU-T H.273)."""

_ALPHA = (b"urn:mpeg:mpegB:cicp:systems:auxiliary:alpha", b"urn:mpeg:hevc:2015:auxid:1")
_TRANSFERS = frozenset({1, 6, 13, 14, 15, UNSPECIFIED})
_FILMS = (b"avis", b"hevc", b"hevx", b"msf1")


def check_single(path: Path, data: bytes, items: Items) -> None:
    """Refuse a file that holds more than one picture can carry on.

    Raises:
        RefusedError: a film, a gain map or further planes.
    """
    way_round = "accept the loss to go on"
    if items.sequence and any(body[:4] in _FILMS for kind, body, _ in boxes(data) if kind == b"ftyp"):
        raise RefusedError(path, f"this file is a film, and all frames but one would be lost; {way_round}")
    if any(item.kind == b"tmap" for item in items.items.values()):
        raise RefusedError(path, f"the file holds a gain map, which would be lost; {way_round}")
    for number in items.items:
        kinds = [payload[4:].split(b"\0")[0] for payload in items.of(number, b"auxC")]
        if any(kind not in _ALPHA for kind in kinds):
            raise RefusedError(path, f"the file holds a depth map or the like, which would be lost; {way_round}")


def colours_of(items: Items) -> tuple[bytes | None, tuple[int, int, int]]:
    """Return the ICC profile, and primaries, transfer and matrix numbers (ITU-T H.273)."""
    held = items.of(items.primary, b"colr")
    profile = next((payload[4:] for payload in held if payload[:4] in (b"prof", b"rICC")), None)
    numbers = next((payload[4:10] for payload in held if payload[:4] == b"nclx" and len(payload) >= 10), b"")
    if not numbers:
        return profile or None, (UNSPECIFIED,) * 3
    first, second, third = (int.from_bytes(numbers[start : start + 2], "big") for start in (0, 2, 4))
    return profile or None, (first, second, third)


def encoding_of(path: Path, colours: tuple[int, int, int]) -> Encoding | None:
    """Return the encoding that numbers stand for; None where they leave it open.

    Raises:
        RefusedError: light that is not relative to white, or numbers that are not known here.
    """
    from hueferry.colour.encoding import BT2020, DISPLAY_P3, SRGB

    primaries, transfer, _ = colours
    if primaries == transfer == UNSPECIFIED:
        return None
    if transfer in (16, 18):
        name = "PQ" if transfer == 16 else "HLG"
        raise RefusedError(
            path, f"its light is coded in {name}, for displays of high range; convert it to a profile, or to OpenEXR"
        )
    known: Mapping[int, Encoding] = {1: SRGB, UNSPECIFIED: SRGB, 9: BT2020, 12: DISPLAY_P3}
    if primaries not in known or transfer not in _TRANSFERS:
        reason = f"its colours are stated by numbers that are not known here (primaries {primaries}, curve {transfer})"
        raise RefusedError(path, f"{reason}; embed an ICC profile")
    if primaries == 9 and transfer == 13:
        return attrs.evolve(BT2020, name="BT.2020 with the curve of sRGB", curves=SRGB.curves)
    return known[primaries]


def exif_and_xmp(data: bytes, items: Items) -> tuple[bytes, bytes]:
    """Return the EXIF block, past its offset (ISO/IEC 23008-12, annex A.2.1), and the XMP packet."""
    held = items.items.items()
    exif = next((items.bytes_of(data, number) for number, item in held if item.kind == b"Exif"), b"")
    xmp = next((items.bytes_of(data, number) for number, item in held if item.content == XMP_TYPE), b"")
    return exif[4 + int.from_bytes(exif[:4], "big") :], xmp
