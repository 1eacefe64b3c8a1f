"""Scanner formats through OpenSlide, an optional library."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.picture import Window
from hueferry.slides.file_slide import FileSlide, Opened
from hueferry.slides.profiles import encoding_of
from hueferry.slides.source import SlideFacts

_BAND = 1 << 22


class ScannerSlide(FileSlide):
    """A slide that OpenSlide reads. Its label and macro images are never touched."""

    def __init__(self, path: Path) -> None:
        """Open `path`.

        Raises:
            PictureError: OpenSlide does not know it.
            RefusedError: OpenSlide is not installed.
        """
        try:
            import openslide
        except ImportError as error:
            raise RefusedError(path, "scanner formats need OpenSlide: pip install 'hueferry[slides]'") from error
        try:
            self._slide = openslide.OpenSlide(path)
        except (openslide.OpenSlideError, OSError) as error:
            raise PictureError(path, f"OpenSlide cannot open it: {error}") from error
        self._error = openslide.OpenSlideError
        self._path = path
        properties = self._slide.properties
        profile = self._slide.color_profile
        hexadecimal = properties.get("openslide.background-color", "FFFFFF")
        self._background = tuple(int(hexadecimal[i : i + 2], 16) for i in (0, 2, 4))
        red, green, blue = self._background
        facts = SlideFacts(
            str(properties.get("openslide.vendor", "scanner")), _pitch(dict(properties)), (red, green, blue),
            {name: value for name, value in properties.items() if not name.startswith("openslide.")},
        )  # fmt: skip
        self._opened = Opened(
            [(height, width) for width, height in self._slide.level_dimensions],
            encoding_of(path, None if profile is None else profile.tobytes()),
            8,  # OpenSlide hands out no more
            facts,
        )

    def read_level(self, level: int, window: Window) -> Pixels:
        """Return a window of a level; what was not scanned has the background colour.

        Raises:
            PictureError: the file is broken there.
        """
        result = np.empty((window.height, window.width, 3), np.uint8)
        rows = max(1, _BAND // window.width)
        scale = self._slide.level_downsamples[level]
        for top in range(0, window.height, rows):
            height = min(rows, window.height - top)
            corner = round(window.left * scale), round((window.top + top) * scale)
            try:
                region = self._slide.read_region(corner, level, (window.width, height))
            except self._error as error:
                raise PictureError(self._path, f"the slide is broken: {error}") from error
            pixels = np.asarray(region)
            alpha = pixels[:, :, 3:].astype(np.uint16)
            ground = np.array(self._background, np.uint16)
            result[top : top + height] = (pixels[:, :, :3] * alpha + ground * (255 - alpha) + 127) // 255
        return result

    def close(self) -> None:
        """Let go of the file."""
        self._slide.close()


def _pitch(properties: dict[str, str]) -> tuple[float, float] | None:
    try:
        x, y = (float(properties[f"openslide.mpp-{axis}"]) for axis in "xy")
    except (KeyError, ValueError):
        return None
    return (x, y) if x > 0 and y > 0 else None
