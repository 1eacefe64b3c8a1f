"""A plain image, such as a field of view, as a slide with one level."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from hueferry.arrays import Pixels
from hueferry.errors import RefusedError
from hueferry.files.read import read
from hueferry.picture import Encoding, Picture, Window
from hueferry.slides.source import SlideFacts


class PlainSlide:
    """A picture in memory that is treated as a slide; alpha is left out."""

    def __init__(self, path: Path, picture: Picture | None = None) -> None:
        """Read the image.

        Raises:
            PictureError: it cannot be read.
            RefusedError: it is gray.
        """
        self._picture = read(path) if picture is None else picture
        if self._picture.is_gray:
            raise RefusedError(path, "it is gray; stains need colour")
        self._facts = SlideFacts(self._picture.metadata.format or "picture")

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self._picture.shape

    @property
    def levels(self) -> Sequence[tuple[int, int]]:
        """The only level."""
        return [self._picture.shape]

    @property
    def encoding(self) -> Encoding:
        """How codes stand for colour."""
        return self._picture.encoding

    @property
    def bits(self) -> int:
        """Significant bits a channel."""
        return self._picture.bits

    @property
    def facts(self) -> SlideFacts:
        """What else the file says."""
        return self._facts

    def read(self, window: Window) -> Pixels:
        """Return a window."""
        return self._picture.read(window)[:, :, :3]

    def read_level(self, level: int, window: Window) -> Pixels:  # noqa: ARG002 - there is one level
        """Return a window of the only level."""
        return self.read(window)

    def close(self) -> None:
        """Nothing is held."""
