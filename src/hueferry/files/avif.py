"""AVIF: items read and spliced by ourselves, pixels by libavif at 8, 10 or 12 bits.

Where a file holds an ICC profile, that is its colour; otherwise the numbers of ITU-T H.273 in its "nclx" property are
(AV1 Image File Format 1.1, clause 2.2). The turn that a viewer makes is in "irot" and "imir"; EXIF's is not asked.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

import attrs
import numpy as np

from hueferry.errors import InputError, PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.iso_pictures import UNSPECIFIED, XMP_TYPE, check_single, colours_of, encoding_of, exif_and_xmp
from hueferry.files.isobmff import Item, Items, assemble, boxes, read_items
from hueferry.files.probe import check_size
from hueferry.picture import Metadata, Picture

_QUALITY = 99
"""Where the source is a lossy AVIF, or HEIC, and no quality is asked for; always without chroma subsampling."""

_SPEED, _LOSSY_SPEED = 9, 7
"""Of ten: five times faster than 7 for three in a hundred more bytes; lossy pictures would lose a decibel."""
_KEPT = (b"clap", b"pasp")

TURNS: Mapping[int, tuple[int | None, int | None]] = MappingProxyType(
    {1: (None, None), 2: (None, 1), 3: (2, None), 4: (None, 0), 5: (1, 0), 6: (3, None), 7: (3, 0), 8: (1, None)}
)
"""EXIF orientation to quarter turns, counterclockwise, and the mirror after them: 0 top to bottom, 1 left to right."""


def read_avif(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
    """Decode the picture of an AVIF file at its own depth.

    Raises:
        PictureError: the file is broken.
        RefusedError: a film, a gain map or further pictures that would be lost, or light that is not relative.
    """
    import imagecodecs

    try:
        items = read_items(data)
        if not accept_loss:
            check_single(path, data, items)
        for extent in items.of(items.primary, b"ispe")[:1]:
            check_size(path, (int.from_bytes(extent[8:12], "big"), int.from_bytes(extent[4:8], "big")))
        profile, colours = colours_of(items)
        encoding = None if profile else encoding_of(path, colours)
        pixels = np.asarray(imagecodecs.avif_decode(_without_film(data, items)))
    except RefusedError:
        raise
    except InputError as error:
        raise PictureError(path, str(error)) from error
    except (imagecodecs.AvifError, ValueError, MemoryError, IndexError) as error:
        raise PictureError(path, f"the AVIF cannot be decoded: {error}") from error
    shaped = pixels[:, :, None] if pixels.ndim == 2 else pixels
    return Decoded(shaped, _metadata(data, items, colours), profile, bits=_bits(items), encoding=encoding)


def _without_film(data: bytes, items: Items) -> bytes:
    """Return a file of the items alone, where there is a track beside them: the decoder would take its frames."""
    if not items.sequence:
        return data
    bodies = {number: items.bytes_of(data, number) for number in items.items}
    return assemble(b"avif\0\0\0\0avifmif1miaf", items, bodies)


def _bits(items: Items) -> int:
    """Return the depth of the first AV1 configuration (AV1 in ISO base media, clause 2.3.3)."""
    flags = next((payload[2] for kind, payload in items.properties if kind == b"av1C" and len(payload) > 2), 0)
    return (12 if flags & 0x20 else 10) if flags & 0x40 else 8


def _metadata(data: bytes, items: Items, colours: tuple[int, int, int]) -> Metadata:
    exif, xmp = exif_and_xmp(data, items)
    turn = next((payload[0] & 3 for payload in items.of(items.primary, b"irot") if payload), None) or None
    mirror = next((payload[0] & 1 for payload in items.of(items.primary, b"imir") if payload), None)
    return Metadata(
        format="avif",
        exif=exif,
        xmp=xmp,
        orientation=_orientation(turn, mirror),
        container={
            "numbers": colours,
            "lossless": colours[2] == 0 or _is_gray(items),
            "kept": tuple((kind, payload) for kind in _KEPT for payload in items.of(items.primary, kind)[:1]),
        },
    )


def _orientation(turn: int | None, mirror: int | None) -> int:
    """Return the EXIF orientation of a turn and a mirror; a half turn before a mirror is the other mirror."""
    if turn == 2 and mirror is not None:
        turn, mirror = None, 1 - mirror
    if mirror == 1 and turn in (1, 3):
        turn, mirror = 4 - turn, 0
    return next(value for value, way in TURNS.items() if way == (turn, mirror))


def _is_gray(items: Items) -> bool:
    return any(kind == b"av1C" and len(payload) > 2 and payload[2] & 0x10 for kind, payload in items.properties)


def write_avif(picture: Picture, profile: bytes | None, *, quality: int | None) -> bytes:
    """Encode an AVIF at the picture's depth; lossless unless its source is lossy, AVIF or HEIC, or a quality is given.

    Args:
        picture: 8, 10 or 12 bits.
        profile: ICC profile to embed, unless the source was an AVIF that states its colours by numbers.
        quality: 1 … 100; 100 is lossless.
    """
    import imagecodecs

    facts = picture.metadata.container if picture.metadata.format in ("avif", "heic") else {}
    level = quality or (100 if facts.get("lossless", True) else _QUALITY)
    plain = picture.pixels[:, :, 0] if picture.pixels.shape[2] == 1 else picture.pixels
    primaries, transfer = _numbers(facts) or (UNSPECIFIED, UNSPECIFIED)
    stream = bytes(
        imagecodecs.avif_encode(
            np.ascontiguousarray(plain),
            level=level,
            bitspersample=picture.bits,
            pixelformat="444",
            speed=_SPEED if level == 100 else _LOSSY_SPEED,
            primaries=primaries,
            transfer=transfer,
        )
    )
    embedded = None if _numbers(facts) and picture.encoding.profile is None else profile
    return _spliced(stream, picture.metadata, embedded, facts)


def _numbers(facts: Mapping[str, Any]) -> tuple[int, int] | None:
    """Return the primaries and transfer that the source stated, if it did."""
    numbers = facts.get("numbers")
    if not isinstance(numbers, tuple) or numbers[:2] == (UNSPECIFIED, UNSPECIFIED):
        return None
    return int(numbers[0]), int(numbers[1])


def _spliced(stream: bytes, metadata: Metadata, profile: bytes | None, facts: Mapping[str, Any]) -> bytes:
    """Return the encoder's file with profile, turn, EXIF and XMP put in."""
    items = read_items(stream)
    turn, mirror = TURNS.get(metadata.orientation, (None, None))
    added: list[tuple[bytes, bytes, bool]] = [(b"colr", b"prof" + profile, False)] if profile else []
    kept = facts.get("kept")
    added += [(kind, payload, kind == b"clap") for kind, payload in kept] if isinstance(kept, tuple) else []
    added += [(b"irot", bytes([turn]), True)] if turn is not None else []
    added += [(b"imir", bytes([mirror]), True)] if mirror is not None else []
    bodies = {number: items.bytes_of(stream, number) for number in items.items}
    held = {number: _with(item, items, added, number == items.primary) for number, item in items.items.items()}
    references = items.references
    for kind, content, body in (
        (b"Exif", b"", bytes(4) + metadata.exif if metadata.exif else b""),
        (b"mime", XMP_TYPE, metadata.xmp),
    ):
        if body:
            number = max(held) + 1
            held[number], bodies[number] = Item(kind, content), body
            references = (*references, (b"cdsc", number, (items.primary,)))
    properties = items.properties + tuple((kind, payload) for kind, payload, _ in added)
    brands = next(payload for kind, payload, _ in boxes(stream) if kind == b"ftyp")
    return assemble(brands, Items(items.primary, held, properties, references), bodies)


def _with(item: Item, items: Items, added: list[tuple[bytes, bytes, bool]], primary: bool) -> Item:
    """Give the picture all that was added, and its alpha what moves pixels, so that they stay together."""
    first = len(items.properties)
    links = tuple(
        (first + place, essential)
        for place, (kind, _, essential) in enumerate(added)
        if primary or kind in (b"irot", b"imir", b"clap")
    )
    return attrs.evolve(item, properties=item.properties + links)
