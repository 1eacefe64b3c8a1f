"""A plain image, such as a field of view, as a slide with one level."""

from __future__ import annotations

from pathlib import Path

from hueferry.arrays import Pixels
from hueferry.errors import RefusedError
from hueferry.files.read import read
from hueferry.picture import Picture, Window
from hueferry.slides.file_slide import FileSlide, Opened
from hueferry.slides.source import SlideFacts


class PlainSlide(FileSlide):
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
        facts = SlideFacts(self._picture.metadata.format or "picture")
        self._opened = Opened([self._picture.shape], self._picture.encoding, self._picture.bits, facts)

    def read_level(self, level: int, window: Window) -> Pixels:  # noqa: ARG002 - there is one level
        """Return a window of the only level."""
        return self._picture.read(window)[:, :, :3]
