"""What a reader gives and a writer takes, whatever the format."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Protocol

import attrs

from hueferry.arrays import Pixels
from hueferry.picture import Encoding, Metadata, Picture


@attrs.frozen(eq=False)
class Decoded:
    """What a reader found in a file.

    Attributes:
        pixels: as in `Picture`.
        metadata: as in `Picture`.
        profile: the ICC profile in the file, or None.
        bits: significant bits, where the array alone does not tell; None means all of it.
        encoding: where the file states its colours without a profile; None means it does not.
        notes: sentences for the record.
    """

    pixels: Pixels
    metadata: Metadata
    profile: bytes | None
    bits: int | None = None
    encoding: Encoding | None = None
    notes: tuple[str, ...] = ()


class Reader(Protocol):
    """Decodes a whole file that is in memory; pure, thread-safe."""

    def __call__(self, path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
        """Decode `data`; `path` is for messages only."""
        ...


class Writer(Protocol):
    """Encodes a whole file into memory; pure, thread-safe."""

    def __call__(self, picture: Picture, profile: bytes | None, *, quality: int | None) -> bytes:
        """Encode a picture that the format can hold; `quality` is 1 … 100, or None for no worse than the source."""
        ...


@attrs.frozen
class Codec:
    """How a format is read and written."""

    read: Reader
    write: Writer | None


LoadCodec = Callable[[], Codec]
"""Imports a format's modules, which is slow, when they are needed."""
