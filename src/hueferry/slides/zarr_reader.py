"""OME-Zarr 0.4 and 0.5, read chunk by chunk; zarr is an optional library."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.picture import Window
from hueferry.slides.file_slide import FileSlide, Opened
from hueferry.slides.profiles import encoding_of
from hueferry.slides.source import SlideFacts

_UNITS = {"micrometer": 1.0, "nanometer": 1e-3, "millimeter": 1e3, "meter": 1e6}


class ZarrSlide(FileSlide):
    """A slide in an OME-Zarr folder."""

    def __init__(self, path: Path) -> None:
        """Open the group and read its attributes, no pixels.

        Raises:
            PictureError: it is no OME-Zarr image.
            RefusedError: it is not RGB, or zarr is not installed.
        """
        try:
            import zarr
        except ImportError as error:
            raise RefusedError(path, "OME-Zarr needs zarr: pip install 'hueferry[slides]'") from error
        try:
            group: Any = zarr.open_group(str(path), mode="r")
            attributes = dict(group.attrs)
            scales: Any = attributes.get("ome", attributes)["multiscales"][0]
            self._arrays = [group[data["path"]] for data in scales["datasets"]]
            self._axes = [str(axis["name"] if isinstance(axis, Mapping) else axis).lower() for axis in scales["axes"]]
        except (KeyError, IndexError, ValueError, TypeError, OSError) as error:
            raise PictureError(path, f"this is not an OME-Zarr image: {error}") from error
        self._path = path
        self._check(path)
        profile = path / "profile.icc"
        y, x = self._axes.index("y"), self._axes.index("x")
        self._opened = Opened(
            [(int(array.shape[y]), int(array.shape[x])) for array in self._arrays],
            encoding_of(path, profile.read_bytes() if profile.is_file() else None),
            8 * int(self._arrays[0].dtype.itemsize),
            SlideFacts("ome-zarr", _pitch(scales, self._axes)),
        )

    def _check(self, path: Path) -> None:
        sizes = dict(zip(self._axes, self._arrays[0].shape, strict=True))
        if any(size != 1 for name, size in sizes.items() if name not in "cyx"):
            raise RefusedError(path, "it holds several depths or times, not one bright-field picture")
        if sizes.get("c") != 3:
            raise RefusedError(
                path, f"it holds {sizes.get('c', 1)} channels; a bright-field slide has red, green, blue"
            )
        if self._arrays[0].dtype not in (np.uint8, np.uint16, np.float32):
            raise RefusedError(path, f"it holds {self._arrays[0].dtype}; a slide has 8 bit, 16 bit or 32-bit float")

    def read_level(self, level: int, window: Window) -> Pixels:
        """Return a window of a level.

        Raises:
            PictureError: a chunk is broken.
        """
        cut = {
            "y": slice(window.top, window.top + window.height),
            "x": slice(window.left, window.left + window.width),
            "c": slice(None),
        }
        try:
            part = np.asarray(self._arrays[level][tuple(cut.get(name, 0) for name in self._axes)])
        except (RuntimeError, ValueError, OSError) as error:
            raise PictureError(self._path, f"a chunk of level {level} is broken: {error}") from error
        kept = [name for name in self._axes if name in "cyx"]
        return np.ascontiguousarray(part.transpose([kept.index(name) for name in "yxc"]))


def _pitch(scales: Mapping[str, Any], axes: list[str]) -> tuple[float, float] | None:
    try:
        scale = next(t["scale"] for t in scales["datasets"][0]["coordinateTransformations"] if t["type"] == "scale")
        found = []
        for name in "xy":
            axis = scales["axes"][axes.index(name)]
            found.append(float(scale[axes.index(name)]) * _UNITS[axis["unit"]])
    except (KeyError, IndexError, StopIteration, TypeError, ValueError):
        return None
    return (found[0], found[1]) if min(found) > 0 else None
