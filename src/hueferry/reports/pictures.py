"""The pictures in a report, as data that a page can carry."""

from __future__ import annotations

import base64
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from hueferry.errors import HueferryError
from hueferry.picture import Picture
from hueferry.series.glimpse import Glimpse, take_glimpse


def glimpse_again(folder: Path, entry: Mapping[str, Any], *, count: int) -> Glimpse | None:
    """Look at an entry's files for a page with `count` pictures; None if one is gone or no longer readable."""
    from hueferry.files.read import read

    if entry["output"] is None:
        return None
    try:
        before, after = read(Path(entry["source"]["path"])), read(folder / entry["output"]["path"])
    except HueferryError:
        return None
    return take_glimpse(before, after, count=count) if before.shape == after.shape else None


def template_values(glimpse: Glimpse) -> dict[str, Any]:
    """Return the values that the page's template names."""
    values = {
        "before": _address(glimpse.before),
        "after": _address(glimpse.after),
        "width": glimpse.width,
        "height": glimpse.height,
    }
    if glimpse.spot is not None:
        values["spot_before"] = _address(glimpse.spot.before)
        values["spot_after"] = _address(glimpse.spot.after)
        values["spot_said"] = glimpse.spot.said
    return values


def picture_address(picture: Picture, longest: int) -> str:
    """Return a picture as a data address, at most `longest` pixels on a side."""
    from hueferry.files.jpeg import jpeg_bytes
    from hueferry.files.thumbnail import thumbnail

    return _address(jpeg_bytes(thumbnail(picture, longest).pixels, quality=86))


def _address(jpeg: bytes) -> str:
    return "data:image/jpeg;base64," + base64.b64encode(jpeg).decode("ascii")
