"""What holds for every reader, whatever the bytes: a valid picture or a typed refusal, and nothing else."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from hypothesis import strategies as st

from hueferry.errors import PictureError
from hueferry.files.codec import Decoded
from hueferry.files.formats import codec

_HEADS = (0, 1, 2, 0x7F, 0x80, 0xFE, 0xFF)

edits = st.lists(
    st.tuples(
        st.sampled_from(("set", "cut", "drop", "double", "long", "swap")),
        st.integers(0, 1 << 16),
        st.sampled_from(_HEADS) | st.integers(0, 255),
    ),
    min_size=1,
    max_size=6,
)
"""Changes to a file: a byte set, the end cut off, a stretch dropped or doubled, a length inflated, a byte moved."""


def broken(seed: bytes, changes: list[tuple[str, int, int]]) -> bytes:
    """Return a file after some changes."""
    data = bytearray(seed)
    for kind, place, value in changes:
        at = place % max(len(data), 1)
        if kind == "set" and data:
            data[at] = value
        elif kind == "cut":
            del data[at:]
        elif kind == "drop":
            del data[at : at + value]
        elif kind == "double":
            data[at:at] = data[at : at + value]
        elif kind == "long":
            data[at : at + 4] = bytes((0xFF, 0xFF, value, 0xFF))
        elif data:
            data[at], data[-1] = data[-1], data[at]
    return bytes(data)


def decode(format_: str, data: bytes) -> Decoded | None:
    """Decode bytes as a format, as `read` would do it after the first bytes told the format; None for a refusal."""
    try:
        decoded = codec(format_).read(Path("a"), data, accept_loss=True)
    except PictureError:
        return None
    assert decoded.pixels.ndim == 3
    assert decoded.pixels.size > 0
    assert decoded.pixels.dtype in (np.uint8, np.uint16, np.float32)
    assert 1 <= decoded.metadata.orientation <= 8
    assert all(isinstance(note, str) and note.isprintable() for note in decoded.notes)
    return decoded


NAMES = ("jpeg", "png", "webp")
"""Readers that are targets."""
