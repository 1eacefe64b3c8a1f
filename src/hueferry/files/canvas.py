"""A sheet to draw on: smooth lines, areas and words, saved as PNG in sRGB; the same drawing, the same bytes."""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from PIL.ImageFont import FreeTypeFont, ImageFont

Colour = tuple[int, int, int]
"""sRGB, 0 … 255."""

Point = tuple[float, float]
"""Right and down, in pixels of the finished sheet."""

_FINER = 3
"""Everything is drawn this much larger and averaged down: edges become smooth."""

_LATIN = frozenset("…·±°%“”")


class Canvas:
    """A sheet of one colour, drawn on from back to front."""

    def __init__(self, width: int, height: int, paper: Colour) -> None:
        """Take a sheet.

        Args:
            width: pixels.
            height: pixels.
            paper: its colour.
        """
        from PIL import Image, ImageDraw

        self.width, self.height = width, height
        self._image = Image.new("RGB", (width * _FINER, height * _FINER), paper)
        self._draw = ImageDraw.Draw(self._image)

    def line(self, points: Sequence[Point], colour: Colour, *, width: float = 1.0) -> None:
        """Draw a line through points, with round ends and corners."""
        scaled = [(x * _FINER, y * _FINER) for x, y in points]
        self._draw.line(scaled, fill=colour, width=max(1, round(width * _FINER)), joint="curve")
        if width >= 2:
            for x, y in (points[0], points[-1]):
                self.dot((x, y), width / 2, colour)

    def area(self, points: Sequence[Point], colour: Colour) -> None:
        """Fill a polygon."""
        self._draw.polygon([(x * _FINER, y * _FINER) for x, y in points], fill=colour)

    def box(self, corner: Point, size: Point, colour: Colour, *, radius: float = 0.0) -> None:
        """Fill a rectangle, with corners of a radius."""
        left, top = corner[0] * _FINER, corner[1] * _FINER
        right, bottom = left + size[0] * _FINER - 1, top + size[1] * _FINER - 1
        if right >= left and bottom >= top:
            self._draw.rounded_rectangle((left, top, right, bottom), radius * _FINER, fill=colour)

    def dot(self, centre: Point, radius: float, colour: Colour, *, ring: Colour | None = None) -> None:
        """Draw a disc, with a thin ring around it if asked."""
        for reach, fill in ((radius + 1.0, ring), (radius, colour)):
            if fill is not None:
                x, y = centre[0] * _FINER, centre[1] * _FINER
                self._draw.ellipse((*(v - reach * _FINER for v in (x, y)), *(v + reach * _FINER for v in (x, y))), fill)

    def circle(self, centre: Point, radius: float, colour: Colour, *, width: float = 1.0) -> None:
        """Draw a circle that is not filled."""
        x, y, reach = centre[0] * _FINER, centre[1] * _FINER, radius * _FINER
        self._draw.ellipse((x - reach, y - reach, x + reach, y + reach), outline=colour, width=round(width * _FINER))

    def words(self, at: Point, text: str, colour: Colour, *, size: float = 15.0, anchor: str = "ls") -> None:
        """Write one line; `anchor` is `l`, `m` or `r` across, then `s` for the base line or `m` for the middle."""
        shown = "".join(one if one.isascii() or one in _LATIN else "?" for one in text if one.isprintable())
        self._draw.text((at[0] * _FINER, at[1] * _FINER), shown, fill=colour, font=_font(size), anchor=anchor)

    def strip(self, corner: Point, size: Point, colours: NDArray[np.uint8]) -> None:
        """Fill a rectangle with (n, 3) sRGB colours side by side."""
        edges = np.linspace(corner[0], corner[0] + size[0], len(colours) + 1)
        for start, end, colour in zip(edges[:-1], edges[1:], colours.tolist(), strict=True):
            self.box((start, corner[1]), (end - start + 1 / _FINER, size[1]), tuple(colour))

    def pixels(self) -> NDArray[np.uint8]:
        """Return the sheet as (height, width, 3) sRGB."""
        return np.asarray(self._small())

    def png(self) -> bytes:
        """Return the sheet as a PNG file."""
        stream = io.BytesIO()
        self._small().save(stream, "PNG", optimize=True)
        return stream.getvalue()

    def _small(self) -> Any:  # noqa: ANN401 - Pillow's image, which no other module sees
        return self._image.reduce(_FINER)


def _font(size: float) -> FreeTypeFont | ImageFont:
    from PIL import ImageFont

    return ImageFont.load_default(size * _FINER)
