"""Pictures in ISO base media files: items, their properties and places, read and put together again.

References:
    ISO/IEC 14496-12 (boxes, items and their places), ISO/IEC 23008-12 (pictures, their properties).
"""

from __future__ import annotations

import struct
from collections.abc import Iterator, Mapping

import attrs

from hueferry.errors import InputError

Extent = tuple[int, int]
"""Offset in the file and length, in bytes."""

_MOST = 4096
"""Items, properties or boxes that are read; a picture has a few dozen at most."""


@attrs.frozen(eq=False)
class Item:
    """One item of a file.

    Attributes:
        kind: its four letters, such as b"av01", b"Exif", b"mime".
        content: the media type of a "mime" item.
        extents: where its bytes lie.
        properties: (index into the file's properties, whether a reader must understand it), in order.
    """

    kind: bytes
    content: bytes = b""
    extents: tuple[Extent, ...] = ()
    properties: tuple[tuple[int, bool], ...] = ()


@attrs.frozen(eq=False)
class Items:
    """What the "meta" box of a file says.

    Attributes:
        primary: number of the item that is the picture.
        items: by number.
        properties: (four letters, payload) of each.
        references: (four letters, from, to), such as b"cdsc" from metadata to a picture.
        sequence: whether there is a track beside the items.
    """

    primary: int
    items: Mapping[int, Item]
    properties: tuple[tuple[bytes, bytes], ...]
    references: tuple[tuple[bytes, int, tuple[int, ...]], ...]
    sequence: bool = False

    def of(self, number: int, kind: bytes) -> list[bytes]:
        """Return the payloads of the properties of one kind that an item has."""
        item = self.items.get(number, Item(b""))
        held = [self.properties[index] for index, _ in item.properties if index < len(self.properties)]
        return [payload for name, payload in held if name == kind]

    def bytes_of(self, data: bytes, number: int) -> bytes:
        """Return the bytes of an item."""
        return b"".join(data[start : start + length] for start, length in self.items[number].extents)


class _Reader:
    """Numbers from a payload, one after the other; running out of bytes is an error."""

    def __init__(self, data: bytes, start: int = 0) -> None:
        self.data, self.at = data, start

    def number(self, size: int) -> int:
        if self.at + size > len(self.data):
            raise InputError("a box ends early; the file is broken")
        self.at += size
        return int.from_bytes(self.data[self.at - size : self.at], "big")

    def text(self) -> bytes:
        end = self.data.find(b"\0", self.at)
        end = len(self.data) if end < 0 else end
        start, self.at = self.at, end + 1
        return self.data[start:end]

    def full(self) -> tuple[int, int]:
        """Version and flags."""
        return self.number(1), self.number(3)


def boxes(data: bytes, start: int = 0) -> Iterator[tuple[bytes, bytes, int]]:
    """Give the boxes from `start` on: four letters, payload, and where the payload begins.

    Raises:
        InputError: a box is longer than what holds it, or there are too many.
    """
    for _ in range(_MOST):
        if start + 8 > len(data):
            return
        size, kind, head = int.from_bytes(data[start : start + 4], "big"), data[start + 4 : start + 8], 8
        if size == 1:
            size, head = int.from_bytes(data[start + 8 : start + 16], "big"), 16
        size = len(data) - start if size == 0 else size
        if size < head or start + size > len(data):
            raise InputError("a box is longer than the file; the file ends early")
        yield kind, data[start + head : start + size], start + head
        start += size
    raise InputError("there are more boxes than a picture has")


def read_items(data: bytes) -> Items:
    """Read the items of a file.

    Raises:
        InputError: the file is broken, or says nothing of a picture.
    """
    top = {kind: (payload, at) for kind, payload, at in boxes(data)}
    if b"meta" not in top:
        raise InputError("the file lists no pictures; it is broken, or a film")
    inner, start = top[b"meta"]
    meta = {kind: (payload, start + at) for kind, payload, at in boxes(inner, 4)}
    if any(kind not in meta for kind in (b"pitm", b"iloc", b"iinf", b"iprp")):
        raise InputError("the list of pictures is incomplete; the file is broken")
    places = _places(meta[b"iloc"][0], meta[b"idat"][1] if b"idat" in meta else None)
    kinds = _kinds(meta[b"iinf"][0])
    properties, links = _properties(meta[b"iprp"][0])
    reader = _Reader(meta[b"pitm"][0])
    primary = reader.number(2 if reader.full()[0] == 0 else 4)
    items = {
        number: attrs.evolve(item, extents=places.get(number, ()), properties=links.get(number, ()))
        for number, item in kinds.items()
    }
    if primary not in items:
        raise InputError("the picture that is named is not there; the file is broken")
    references = _references(meta[b"iref"][0]) if b"iref" in meta else ()
    return Items(primary, items, properties, references, sequence=b"moov" in top)


def _places(payload: bytes, inside: int | None) -> dict[int, tuple[Extent, ...]]:
    """Read an item location box (ISO/IEC 14496-12, clause 8.11.3).

    Items lie in the file itself (method 0), or `inside` the box of data of the list (method 1); others have no place.
    """
    reader = _Reader(payload)
    version, _ = reader.full()
    sizes = reader.number(2)
    offset_size, length_size, base_size = sizes >> 12, sizes >> 8 & 15, sizes >> 4 & 15
    index_size = sizes & 15 if version else 0
    found: dict[int, tuple[Extent, ...]] = {}
    for _ in range(min(reader.number(4 if version == 2 else 2), _MOST)):
        number = reader.number(4 if version == 2 else 2)
        method = reader.number(2) & 15 if version else 0
        reader.number(2)
        base = reader.number(base_size) + (inside or 0) * (method == 1)
        extents = []
        for _ in range(min(reader.number(2), _MOST)):
            reader.number(index_size)
            extents.append((base + reader.number(offset_size), reader.number(length_size)))
        found[number] = tuple(extents) if method == 0 or (method == 1 and inside is not None) else ()
    return found


def _kinds(payload: bytes) -> dict[int, Item]:
    """Read an item information box (ISO/IEC 14496-12, clause 8.11.6)."""
    start = 6 if payload[:1] == b"\0" else 8
    found: dict[int, Item] = {}
    for kind, body, _ in boxes(payload, start):
        reader = _Reader(body)
        version, _ = reader.full()
        if kind != b"infe" or version < 2:
            continue
        number = reader.number(2 if version == 2 else 4)
        reader.number(2)
        letters = reader.number(4).to_bytes(4, "big")
        reader.text()
        found[number] = Item(letters, reader.text() if letters == b"mime" else b"")
    return found


def _properties(payload: bytes) -> tuple[tuple[tuple[bytes, bytes], ...], dict[int, tuple[tuple[int, bool], ...]]]:
    """Read properties and who has them (ISO/IEC 14496-12, clause 8.11.14)."""
    held: tuple[tuple[bytes, bytes], ...] = ()
    links: dict[int, tuple[tuple[int, bool], ...]] = {}
    for kind, body, _ in boxes(payload):
        if kind == b"ipco":
            held = tuple((name, inner) for name, inner, _ in boxes(body))
        elif kind == b"ipma":
            reader = _Reader(body)
            version, flags = reader.full()
            for _ in range(min(reader.number(4), _MOST)):
                number = reader.number(2 if version == 0 else 4)
                links[number] = tuple(_link(reader, wide=bool(flags & 1)) for _ in range(reader.number(1)))
    return held, links


def _link(reader: _Reader, *, wide: bool) -> tuple[int, bool]:
    """Read the index of a property, from 1 in the file and from 0 here, and whether it is essential."""
    value, top = (reader.number(2), 0x8000) if wide else (reader.number(1), 0x80)
    return (value & (top - 1)) - 1 if value & (top - 1) else _MOST, bool(value & top)


def _references(payload: bytes) -> tuple[tuple[bytes, int, tuple[int, ...]], ...]:
    size = 2 if payload[:1] == b"\0" else 4
    found = []
    for kind, body, _ in boxes(payload, 4):
        reader = _Reader(body)
        start, count = reader.number(size), reader.number(2)
        found.append((kind, start, tuple(reader.number(size) for _ in range(min(count, _MOST)))))
    return tuple(found)


def box(kind: bytes, payload: bytes) -> bytes:
    """Return a box."""
    return struct.pack(">I4s", 8 + len(payload), kind) + payload


def full_box(kind: bytes, payload: bytes, *, version: int = 0, flags: int = 0) -> bytes:
    """Return a box with version and flags."""
    return box(kind, struct.pack(">I", version << 24 | flags) + payload)


def assemble(brands: bytes, items: Items, bodies: Mapping[int, bytes]) -> bytes:
    """Put a file together.

    Args:
        brands: payload of its "ftyp" box.
        items: what it says; the extents are made here.
        bodies: the bytes of each item.
    """
    front = box(b"ftyp", brands)
    empty = dict.fromkeys(bodies, 0)
    start = len(front) + len(_meta(items, bodies, empty)) + 8
    places = {}
    for number, body in bodies.items():
        places[number] = start
        start += len(body)
    return front + _meta(items, bodies, places) + box(b"mdat", b"".join(bodies.values()))


def _meta(items: Items, bodies: Mapping[int, bytes], places: Mapping[int, int]) -> bytes:
    located = b"".join(
        struct.pack(">HHHII", number, 0, 1, place, len(bodies[number])) for number, place in places.items()
    )
    entries = b"".join(_entry(number, item) for number, item in items.items.items())
    wide = len(items.properties) > 126
    form, mark = (">H", 0x8000) if wide else (">B", 0x80)
    links = b"".join(
        struct.pack(">HB", number, len(item.properties))
        + b"".join(struct.pack(form, index + 1 | mark * essential) for index, essential in item.properties)
        for number, item in items.items.items()
        if item.properties
    )
    linked = sum(bool(item.properties) for item in items.items.values())
    parts = [
        full_box(b"hdlr", struct.pack(">I4s", 0, b"pict") + bytes(13)),
        full_box(b"pitm", struct.pack(">H", items.primary)),
        full_box(b"iloc", struct.pack(">HH", 0x4400, len(places)) + located),
        full_box(b"iinf", struct.pack(">H", len(items.items)) + entries),
        full_box(b"iref", b"".join(_reference(*one) for one in items.references)) if items.references else b"",
        box(
            b"iprp",
            box(b"ipco", b"".join(box(kind, payload) for kind, payload in items.properties))
            + full_box(b"ipma", struct.pack(">I", linked) + links, flags=int(wide)),
        ),
    ]
    return full_box(b"meta", b"".join(parts))


def _entry(number: int, item: Item) -> bytes:
    content = item.content + b"\0" if item.kind == b"mime" else b""
    # Metadata are hidden: they are not to be shown (flag 1).
    return full_box(
        b"infe",
        struct.pack(">HH4s", number, 0, item.kind) + b"\0" + content,
        version=2,
        flags=int(item.kind in (b"Exif", b"mime")),
    )


def _reference(kind: bytes, start: int, ends: tuple[int, ...]) -> bytes:
    return box(kind, struct.pack(f">HH{len(ends)}H", start, len(ends), *ends))
