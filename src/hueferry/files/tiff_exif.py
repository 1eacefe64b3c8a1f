"""EXIF in TIFF: directories of their own that the first directory points to, where other formats have one block.

Read from a TIFF they become a block as in JPEG; written, a block's directories are put at the end of the finished file
and the pointers filled in. Values travel as they are; only their byte order is turned where the two differ.

References:
    TIFF 6.0, section 2 (directories); CIPA DC-008 (Exif 2.32), 4.6 (pointers and tags).
"""

from __future__ import annotations

import struct
from collections.abc import Mapping, Sequence

import attrs

EXIF_POINTER, GPS_POINTER = 34665, 34853
_INTEROP_POINTER, _ORIENTATION = 40965, 274
_TEXTS = (270, 271, 272, 305, 306, 315, 33432)
_OF_A_PHOTOGRAPH = frozenset({271, 272, 306, 315, 33432})
"""Maker, model, time, artist and copyright: what other formats have EXIF for."""

_MOST_ENTRIES = 1000
_MOST_BYTES = 1 << 24
_SIZES: Mapping[int, int] = {
    1: 1,
    2: 1,
    3: 2,
    4: 4,
    5: 8,
    6: 1,
    7: 1,
    8: 2,
    9: 4,
    10: 8,
    11: 4,
    12: 8,
    13: 4,
    16: 8,
    18: 8,
}
_UNITS: Mapping[int, int] = {3: 2, 4: 4, 5: 4, 8: 2, 9: 4, 10: 4, 11: 4, 12: 8, 13: 4}
"""Bytes of what is turned as one where the byte order differs; types that are not here are single bytes."""
_LONG, _LONG8, _SHORT, _ASCII = 4, 16, 3, 2

Entries = dict[int, "_Value"]


@attrs.frozen
class _Value:
    """A tag's type, count and bytes, in the byte order of where it was read."""

    kind: int
    count: int
    data: bytes


@attrs.frozen
class _Block:
    """A TIFF or an EXIF block, classic or BigTIFF."""

    data: bytes
    order: str
    big: bool

    @classmethod
    def of(cls, data: bytes) -> _Block | None:
        orders = {b"II": "<", b"MM": ">"}
        if data[:2] not in orders or len(data) < 8:
            return None
        order = orders[data[:2]]
        version = struct.unpack_from(order + "H", data, 2)[0]
        return cls(data, order, version == 43) if version in (42, 43) else None

    def first(self) -> int:
        return self._number(8, 8) if self.big else self._number(4, 4)

    def entries(self, start: int) -> Entries:
        """Return a directory's tags; what points out of the data, or is too large, is left out."""
        step, inline, wide = (20, 8, 8) if self.big else (12, 4, 4)
        head = 8 if self.big else 2
        found: Entries = {}
        if start <= 0 or start + head > len(self.data):
            return found
        for index in range(min(self._number(start, head), _MOST_ENTRIES)):
            place = start + head + step * index
            if place + step > len(self.data):
                break
            tag, kind, count = self._number(place, 2), self._number(place + 2, 2), self._number(place + 4, wide)
            size = _SIZES.get(kind, 0) * count
            at = place + 4 + wide if size <= inline else self._number(place + 4 + wide, wide)
            if 0 < size <= _MOST_BYTES and at + size <= len(self.data):
                found[tag] = _Value(kind, count, self.data[at : at + size])
        return found

    def rows(self) -> tuple[dict[int, bytes], bytes]:
        """Return the first directory's rows as they are, by their tags, and the offset of the next one."""
        start = self.first()
        step, head, wide = (20, 8, 8) if self.big else (12, 2, 4)
        count = min(self._number(start, head), _MOST_ENTRIES)
        places = [start + head + step * index for index in range(count)]
        end = start + head + step * count
        return {self._number(at, 2): self.data[at : at + step] for at in places}, self.data[end : end + wide]

    def pointed(self, entries: Entries, tag: int) -> Entries:
        """Return the directory that a tag points to, without pointers of its own; empty where there is none."""
        value = entries.get(tag)
        if value is None or len(value.data) not in (4, 8):
            return {}
        return self.entries(int.from_bytes(value.data, "little" if self.order == "<" else "big"))

    def _number(self, start: int, size: int) -> int:
        return int.from_bytes(self.data[start : start + size], "little" if self.order == "<" else "big")


def exif_of_tiff(data: bytes, orientation: int) -> bytes:
    """Return the EXIF of a TIFF as a block that starts with a TIFF header, or nothing where it has none.

    Args:
        data: the whole file.
        orientation: what the block is to state, 1 … 8.
    """
    block = _Block.of(data)
    if block is None:
        return b""
    first = block.entries(block.first())
    inner, place = block.pointed(first, EXIF_POINTER), block.pointed(first, GPS_POINTER)
    if not inner and not place and not first.keys() & _OF_A_PHOTOGRAPH:
        return b""
    outer = {tag: first[tag] for tag in _TEXTS if tag in first and first[tag].kind == _ASCII}
    outer[_ORIENTATION] = _Value(_SHORT, 1, struct.pack(block.order + "H", orientation))
    header = (b"II" if block.order == "<" else b"MM") + struct.pack(block.order + "HI", 42, 8)
    body = _chained(block, outer, inner, place, at=8)
    return header + body


def texts_of_exif(exif: bytes) -> Sequence[tuple[int, str]]:
    """Return description, maker, model, software, time, artist and copyright of an EXIF block, by their tags."""
    block = _Block.of(exif)
    first = {} if block is None else block.entries(block.first())
    found = [(tag, first[tag].data.split(b"\0")[0]) for tag in _TEXTS if tag in first and first[tag].kind == _ASCII]
    return [(tag, text.decode("ascii")) for tag, text in found if text and text.isascii()]


def with_exif(tiff: bytes, exif: bytes) -> bytes:
    """Return a finished TIFF with the directories of an EXIF block at its end, and a first directory that points there.

    The new first directory takes the place of the old one, whose long values stay where they are.
    """
    source, target = _Block.of(exif), _Block.of(tiff)
    if source is None or target is None or not source.entries(source.first()).keys() & {EXIF_POINTER, GPS_POINTER}:
        return tiff
    first, side = source.entries(source.first()), "little" if target.order == "<" else "big"
    rows, following = target.rows()
    whole = bytearray(tiff)
    for tag in (EXIF_POINTER, GPS_POINTER):
        inner = source.pointed(first, tag)
        if not inner:
            continue
        interop = _turned(source.pointed(inner, _INTEROP_POINTER), source.order, target.order)
        whole += bytes(len(whole) % 2)
        pointer = _row(tag, len(whole), target)
        whole += _directory(_turned(inner, source.order, target.order), target, at=len(whole), interop=interop)
        rows[tag] = pointer
    whole += bytes(len(whole) % 2)
    place, size = (8, 8) if target.big else (4, 4)
    whole[place : place + size] = len(whole).to_bytes(size, side)  # type: ignore[arg-type]  # one of the two
    head = struct.pack(target.order + ("Q" if target.big else "H"), len(rows))
    return bytes(whole + head + b"".join(rows[tag] for tag in sorted(rows)) + following)


def _row(tag: int, value: int, target: _Block) -> bytes:
    if target.big:
        return struct.pack(target.order + "HHQQ", tag, _LONG8, 1, value)
    return struct.pack(target.order + "HHII", tag, _LONG, 1, value)


def _turned(entries: Entries, before: str, after: str) -> Entries:
    """Turn the byte order of every value that has one."""
    if before == after:
        return entries
    return {tag: attrs.evolve(value, data=_swapped(value)) for tag, value in entries.items()}


def _swapped(value: _Value) -> bytes:
    unit = _UNITS.get(value.kind, 1)
    return b"".join(value.data[at : at + unit][::-1] for at in range(0, len(value.data), unit))


def _chained(block: _Block, outer: Entries, inner: Entries, place: Entries, *, at: int) -> bytes:
    """Return a block's first directory and, behind it, those of EXIF and GPS with the pointers to them."""
    following = {tag: entries for tag, entries in ((EXIF_POINTER, inner), (GPS_POINTER, place)) if entries}
    classic = attrs.evolve(block, big=False)
    blank = outer | {tag: _Value(_LONG, 1, bytes(4)) for tag in following}
    body = b""
    start = at + len(_directory(blank, classic, at=at))
    for tag, entries in following.items():
        interop = block.pointed(entries, _INTEROP_POINTER)
        outer = outer | {tag: _Value(_LONG, 1, struct.pack(block.order + "I", start + len(body)))}
        body += _directory(entries, classic, at=start + len(body), interop=interop)
    return _directory(outer, classic, at=at) + body


def _directory(entries: Entries, target: _Block, *, at: int, interop: Entries | None = None) -> bytes:
    """Return a directory that will stand at offset `at`, its long values and its interoperability tags behind it."""
    entries = {tag: value for tag, value in entries.items() if tag != _INTEROP_POINTER}
    if interop:
        entries[_INTEROP_POINTER] = _Value(_LONG, 1, bytes(4))
    order, big = target.order, target.big
    head, step, wide = ("Q", 20, 8) if big else ("H", 12, 4)
    start = at + struct.calcsize(order + head) + step * len(entries) + wide
    rows, behind = b"", b""
    for tag in sorted(entries):
        value = entries[tag]
        data = value.data
        if tag == _INTEROP_POINTER and interop:
            nested = _directory(interop, target, at=start + len(behind))
            data, behind = struct.pack(order + "I", start + len(behind)), behind + nested
        if len(data) > wide:
            place = struct.pack(order + ("Q" if big else "I"), start + len(behind))
            behind += data + bytes(len(data) % 2)
        else:
            place = data.ljust(wide, b"\0")
        rows += struct.pack(order + ("HHQ" if big else "HHI"), tag, value.kind, value.count) + place
    return struct.pack(order + head, len(entries)) + rows + bytes(wide) + behind
