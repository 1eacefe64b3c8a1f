"""Items in ISO base media files: what is put together is what is read, wherever the bytes lie."""

from __future__ import annotations

import struct

import numpy as np
import pytest

from hueferry.errors import InputError
from hueferry.files.isobmff import Item, Items, assemble, box, full_box, read_items

BRANDS = b"mif1\0\0\0\0mif1"


@pytest.mark.parametrize("count", [3, 126, 127, 300])
def test_items_and_properties_come_back(count: int) -> None:
    rng = np.random.default_rng(count)
    properties = tuple((b"p%03d" % place, rng.bytes(place % 7)) for place in range(count))
    links = tuple((int(place), bool(place % 2)) for place in rng.integers(0, count, 20))
    items = {
        3: Item(b"av01", properties=links),
        9: Item(b"mime", b"text/plain", properties=links[:4]),
        4: Item(b"Exif"),
    }
    bodies = {3: rng.bytes(50), 9: rng.bytes(7), 4: b""}

    data = assemble(BRANDS, Items(3, items, properties, ((b"cdsc", 9, (3,)), (b"auxl", 4, (3, 9)))), bodies)
    found = read_items(data)

    assert (found.primary, found.properties) == (3, properties)
    assert found.references == ((b"cdsc", 9, (3,)), (b"auxl", 4, (3, 9)))
    assert {number: found.bytes_of(data, number) for number in found.items} == bodies
    assert {number: (one.kind, one.content, one.properties) for number, one in found.items.items()} == {
        number: (one.kind, one.content, one.properties) for number, one in items.items()
    }


def test_bytes_inside_the_list_itself_are_found() -> None:
    """ISO/IEC 14496-12, clause 8.11.3, construction method 1: as telephones place the description of a grid."""
    located = struct.pack(">8H", 0x4400, 1, 5, 1, 0, 1, 0, 2) + struct.pack(">HH", 0, 4)
    entry = full_box(b"infe", struct.pack(">HH4s", 5, 0, b"grid") + b"\0", version=2)
    meta = full_box(
        b"meta",
        full_box(b"pitm", struct.pack(">H", 5))
        + full_box(b"iloc", located, version=1)
        + full_box(b"iinf", struct.pack(">H", 1) + entry)
        + box(b"iprp", box(b"ipco", b"") + full_box(b"ipma", bytes(4)))
        + box(b"idat", b"..grid.."),
    )
    data = box(b"ftyp", BRANDS) + meta

    assert read_items(data).bytes_of(data, 5) == b"grid"


@pytest.mark.parametrize(
    ("data", "complaint"),
    [
        (b"", "lists no pictures"),
        (struct.pack(">I4s", 99, b"ftyp"), "longer than the file"),
        (box(b"meta", bytes(4) + box(b"pitm", b"")), "incomplete"),
        (b"".join(box(b"free", b"") for _ in range(5000)), "more boxes"),
    ],
)
def test_what_is_broken_is_said(data: bytes, complaint: str) -> None:
    with pytest.raises(InputError, match=complaint):
        read_items(data)
