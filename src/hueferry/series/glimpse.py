"""What a page shows of one picture: small pictures before and after, and the spot that changed most."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.picture import Picture, Window

SPOT = 180
"""Side of the spot shown pixel for pixel, in pixels."""

_LONGEST = ((12, 900), (60, 640), (200, 420))
"""(pictures at most, longest side): the more pictures, the smaller, so that a page of 500 stays below 15 MB."""
_SMALLEST = 200
_SPOTS_UP_TO = 40
_QUALITY = 86
_STEP = 6


@attrs.frozen
class Spot:
    """A part of a picture pixel for pixel, before and after: JPEG, sRGB; and where it is, in words."""

    before: bytes
    after: bytes
    said: str


@attrs.frozen
class Glimpse:
    """A picture small, before and after: JPEG, sRGB, upright, `width` × `height` pixels; and its spot, or None."""

    before: bytes
    after: bytes
    width: int
    height: int
    spot: Spot | None = None


def take_glimpse(before: Picture, after: Picture, *, count: int) -> Glimpse:
    """Return what a page of `count` pictures shows of this one.

    Args:
        before: the picture.
        after: what became of it; of the same shape.
        count: pictures on the page.
    """
    from hueferry.files.thumbnail import thumbnail

    longest = next((side for limit, side in _LONGEST if count <= limit), _SMALLEST)
    small = [thumbnail(picture, longest).pixels for picture in (before, after)]
    height, width = small[0].shape[:2]
    spot = _spot(before, after) if count <= _SPOTS_UP_TO else None
    return Glimpse(_jpeg(small[0]), _jpeg(small[1]), width, height, spot)


def _spot(before: Picture, after: Picture) -> Spot:
    from hueferry.files.thumbnail import thumbnail

    window = largest_change(before, after)
    crops = [attrs.evolve(picture, pixels=picture.read(window)) for picture in (before, after)]
    said = f"{window.width} × {window.height} pixels at column {window.left}, row {window.top}."
    return Spot(_jpeg(thumbnail(crops[0], SPOT).pixels), _jpeg(thumbnail(crops[1], SPOT).pixels), said)


def largest_change(before: Picture, after: Picture) -> Window:
    """Return the window, at most `SPOT` pixels square, whose code values changed most on average.

    Windows lie side by side from the top left; large ones are judged by every sixth pixel of every sixth row.
    """
    down, right = (min(SPOT, side) for side in before.shape)
    step_down, step_right = (_STEP if side == SPOT else 1 for side in (down, right))
    rows, columns = before.shape[0] // down, before.shape[1] // right
    looked_at = np.s_[: rows * down : step_down, : columns * right : step_right, :3]
    one, two = (picture.pixels[looked_at].astype(np.float32) for picture in (before, after))
    change = np.abs(one - two)
    blocks = change.reshape(rows, down // step_down, columns, right // step_right, -1)
    row, column = divmod(int(np.argmax(np.nan_to_num(blocks.mean(axis=(1, 3, 4), dtype=np.float64)))), columns)
    return Window(row * down, column * right, down, right)


def _jpeg(pixels: np.ndarray[tuple[int, ...], np.dtype[np.uint8]]) -> bytes:
    from hueferry.files.jpeg import jpeg_bytes

    return jpeg_bytes(pixels, quality=_QUALITY)
