"""The pictures in a report: before and after, and the spot that changed most, as data that a page can carry."""

from __future__ import annotations

import base64
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import attrs
import numpy as np

from hueferry.errors import HueferryError
from hueferry.picture import Picture, Window

SPOT = 180
"""Side of the spot shown pixel for pixel, in pixels."""

_LONGEST = ((12, 900), (60, 640), (200, 420))
"""(pictures at most, longest side): the more pictures, the smaller, so that a page of 500 stays below 15 MB."""
_SMALLEST = 200
_SPOTS_UP_TO = 40


@attrs.frozen
class PicturePair:
    """Data addresses of one picture before and after, and of its spot."""

    before: str
    after: str
    width: int
    height: int
    spot_before: str = ""
    spot_after: str = ""
    spot_said: str = ""

    def as_template_values(self) -> dict[str, Any]:
        """Return the values that the page's template names."""
        return attrs.asdict(self)


def picture_pair(folder: Path, entry: Mapping[str, Any], *, count: int) -> PicturePair | None:
    """Load an entry's pictures for a page with `count` of them; None if a file is gone or no longer readable."""
    from hueferry.files.read import read
    from hueferry.files.thumbnail import thumbnail

    if entry["output"] is None:
        return None
    try:
        before, after = read(Path(entry["source"]["path"])), read(folder / entry["output"]["path"])
    except HueferryError:
        return None
    if before.shape != after.shape:
        return None
    longest = next((side for limit, side in _LONGEST if count <= limit), _SMALLEST)
    small_before, small_after = thumbnail(before, longest), thumbnail(after, longest)
    pair = PicturePair(
        before=_address(small_before.pixels),
        after=_address(small_after.pixels),
        width=small_before.shape[1],
        height=small_before.shape[0],
    )
    return pair if count > _SPOTS_UP_TO else _with_spot(pair, before, after)


def _with_spot(pair: PicturePair, before: Picture, after: Picture) -> PicturePair:
    from hueferry.files.thumbnail import thumbnail

    spot = largest_change(before, after)
    crops = [attrs.evolve(picture, pixels=picture.read(spot)) for picture in (before, after)]
    return attrs.evolve(
        pair,
        spot_before=_address(thumbnail(crops[0], SPOT).pixels),
        spot_after=_address(thumbnail(crops[1], SPOT).pixels),
        spot_said=f"{spot.width} × {spot.height} pixels at column {spot.left}, row {spot.top}.",
    )


def largest_change(before: Picture, after: Picture) -> Window:
    """Return the window, at most `SPOT` pixels square, whose code values changed most on average."""
    height, width = before.shape
    side_down, side_right = min(SPOT, height), min(SPOT, width)
    best, found = -1.0, Window(0, 0, side_down, side_right)
    for top in range(0, height - side_down + 1, side_down):
        for left in range(0, width - side_right + 1, side_right):
            window = Window(top, left, side_down, side_right)
            one, two = before.read(window)[::3, ::3, :3], after.read(window)[::3, ::3, :3]
            change = float(np.abs(one.astype(np.float32) - two.astype(np.float32)).mean())
            if change > best:
                best, found = change, window
    return found


def picture_address(picture: Picture, longest: int) -> str:
    """Return a picture as a data address, at most `longest` pixels on a side."""
    from hueferry.files.thumbnail import thumbnail

    return _address(thumbnail(picture, longest).pixels)


def _address(pixels: np.ndarray[Any, Any]) -> str:
    from hueferry.files.jpeg import jpeg_bytes

    return "data:image/jpeg;base64," + base64.b64encode(jpeg_bytes(pixels, quality=86)).decode("ascii")
