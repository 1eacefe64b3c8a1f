"""Tiled and pyramidal TIFF, BigTIFF and OME-TIFF, read tile by tile."""

from __future__ import annotations

import os
import threading
from collections import OrderedDict
from pathlib import Path
from typing import Any, TypeAlias

import attrs
import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import PictureError, RefusedError
from hueferry.picture import Encoding, Window
from hueferry.slides.file_slide import FileSlide, Opened
from hueferry.slides.source import SlideFacts

TiffPage: TypeAlias = Any
TiffFile: TypeAlias = Any
"""A tifffile page and file; the library has no types."""

_KEPT = 64 << 20
_LARGEST_SEGMENT = 1 << 28
_MICROMETRES = {2: 25400.0, 3: 10000.0}
_TEXTS = {
    270: "description",
    271: "make",
    272: "model",
    305: "software",
    306: "date",
    315: "artist",
    33432: "copyright",
}


@attrs.define(eq=False)
class _Level:
    page: TiffPage
    height: int
    width: int
    rows: int
    columns: int


class TiffSlide(FileSlide):
    """A slide in a TIFF file."""

    def __init__(self, path: Path) -> None:
        """Open `path` and read its tags, no pixels.

        Raises:
            PictureError: this is no TIFF that can be read by windows.
            RefusedError: a TIFF of something else than a colour slide.
        """
        import tifffile

        self._path = path
        try:
            self._tiff = tifffile.TiffFile(path)
        except (tifffile.TiffFileError, OSError, ValueError) as error:
            raise PictureError(path, f"the TIFF cannot be opened as a slide: {error}") from error
        try:
            pages = _pyramid(path, self._tiff)
            self._levels = [_level(path, page) for page in pages]
            self._descriptor = os.open(path, os.O_RDONLY)
        except PictureError:
            self._tiff.close()
            raise
        except (tifffile.TiffFileError, OSError, ValueError, KeyError, IndexError, TypeError) as error:
            self._tiff.close()
            raise PictureError(path, f"the TIFF cannot be opened as a slide: {error}") from error
        self._cache: OrderedDict[tuple[int, int], Pixels] = OrderedDict()
        self._held, self._lock = 0, threading.Lock()
        first = pages[0]
        self._opened = Opened(
            [(level.height, level.width) for level in self._levels],
            _encoding(path, first),
            8 * first.dtype.itemsize,
            SlideFacts("tiff", _pitch(self._tiff, first), None, _texts(first)),
        )

    def read_level(self, level: int, window: Window) -> Pixels:
        """Return a window of a level; only the tiles it touches are decoded.

        Raises:
            PictureError: a tile is broken.
        """
        chosen = self._levels[level]
        result = np.empty((window.height, window.width, 3), chosen.page.dtype)
        first_row, first_column = window.top // chosen.rows, window.left // chosen.columns
        for row in range(first_row, (window.top + window.height - 1) // chosen.rows + 1):
            for column in range(first_column, (window.left + window.width - 1) // chosen.columns + 1):
                self._paste(result, window, level, row, column)
        return result

    def _paste(self, result: Pixels, window: Window, level: int, row: int, column: int) -> None:
        chosen = self._levels[level]
        index = row * -(-chosen.width // chosen.columns) + column
        top, left = row * chosen.rows - window.top, column * chosen.columns - window.left
        rows = slice(max(top, 0), min(top + chosen.rows, window.height))
        columns = slice(max(left, 0), min(left + chosen.columns, window.width))
        # A tile that lies within the window is not asked for again by whoever goes through the slide in order.
        whole = top >= 0 and left >= 0 and top + chosen.rows <= window.height and left + chosen.columns <= window.width
        tile = self._decode(level, index) if whole else self._segment(level, index)
        result[rows, columns] = tile[rows.start - top : rows.stop - top, columns.start - left : columns.stop - left]

    def _segment(self, level: int, index: int) -> Pixels:
        key = (level, index)
        with self._lock:
            found = self._cache.get(key)
            if found is not None:
                self._cache.move_to_end(key)
                return found
        decoded = self._decode(level, index)
        with self._lock:
            if key not in self._cache:
                self._cache[key] = decoded
                self._held += decoded.nbytes
            while self._held > _KEPT and len(self._cache) > 1:
                self._held -= self._cache.popitem(last=False)[1].nbytes
        return decoded

    def _decode(self, level: int, index: int) -> Pixels:
        chosen = self._levels[level]
        page = chosen.page
        height = min(chosen.rows, chosen.height - index // -(-chosen.width // chosen.columns) * chosen.rows)
        whole = (chosen.rows if page.is_tiled else height, chosen.columns, 3)
        count = page.databytecounts[index]
        if count == 0:
            return np.full(whole, 255 if page.dtype == np.uint8 else 65535, page.dtype)  # a tile that was not scanned
        data = os.pread(self._descriptor, count, page.dataoffsets[index])
        tables = page.jpegtables
        try:
            decoded = page.decode(data, index, jpegtables=tables)[0] if tables else page.decode(data, index)[0]
        except Exception as error:  # every codec raises its own kind
            raise PictureError(self._path, f"tile {index} of level {level} is broken: {error}") from error
        return np.asarray(decoded[0][:, :, :3])

    def check_tiles(self, level: int) -> None:
        """Check that every tile of a level lies within the file.

        Raises:
            PictureError: one does not, or is missing.
        """
        chosen = self._levels[level]
        wanted = -(-chosen.height // chosen.rows) * -(-chosen.width // chosen.columns)
        counts, offsets = chosen.page.databytecounts, chosen.page.dataoffsets
        size = os.fstat(self._descriptor).st_size
        for index in range(wanted):
            if index >= len(counts) or counts[index] == 0 or offsets[index] + counts[index] > size:
                raise PictureError(self._path, f"tile {index} of level {level} is missing")

    def close(self) -> None:
        """Let go of the file."""
        self._tiff.close()
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1


def _pyramid(path: Path, tiff: TiffFile) -> list[TiffPage]:
    """Return the pages of the largest picture and of its reductions, whether they are SubIFDs or in the main chain."""
    first = tiff.pages[0]
    if tiff.is_ome and len(tiff.series[0].levels[0].pages) > 1:
        raise RefusedError(path, "it holds several planes (channels, depths or times), not one bright-field picture")
    pages = [first, *(first.pages or ())] if first.subifds else [first]
    if len(pages) == 1:
        ratio = first.imagewidth / first.imagelength
        for page in tiff.pages[1:]:
            page = page.aspage() if hasattr(page, "aspage") else page  # noqa: PLW2901 - the full form of the same page
            reduced = page.is_tiled == first.is_tiled and page.imagewidth < pages[-1].imagewidth
            slack = 2 / min(page.imagelength, page.imagewidth)
            if reduced and abs(page.imagewidth / page.imagelength / ratio - 1) <= slack and page.dtype == first.dtype:
                pages.append(page)
    return pages


def _level(path: Path, page: TiffPage) -> _Level:
    kind = page.photometric.name
    if kind not in ("RGB", "YCBCR") or page.samplesperpixel not in (3, 4) or page.planarconfig != 1:
        raise RefusedError(
            path, f"this TIFF holds {page.samplesperpixel} samples of {kind}; a slide is RGB, interleaved"
        )
    if page.dtype not in (np.uint8, np.uint16, np.float32):
        raise RefusedError(path, f"this TIFF holds {page.dtype} samples; a slide has 8 bit, 16 bit or 32-bit float")
    rows, columns = (page.tilelength, page.tilewidth) if page.is_tiled else (page.rowsperstrip, page.imagewidth)
    rows = min(rows, page.imagelength) if not page.is_tiled else rows
    if rows * columns > _LARGEST_SEGMENT:
        raise RefusedError(path, f"it is stored in pieces of {columns} × {rows} pixels, too large to read by windows")
    return _Level(page, page.imagelength, page.imagewidth, rows, columns)


def _encoding(path: Path, page: TiffPage) -> Encoding:
    from hueferry.slides.profiles import encoding_of

    return encoding_of(path, page.iccprofile)


def _pitch(tiff: TiffFile, page: TiffPage) -> tuple[float, float] | None:
    """Return micrometres a pixel: from OME-XML where there is some, else from the resolution tags."""
    if tiff.is_ome and tiff.ome_metadata:
        from hueferry.slides.ome import pitch_of

        found = pitch_of(tiff.ome_metadata)
        if found is not None:
            return found
    unit = page.tags.get(296)
    scale = _MICROMETRES.get(int(unit.value) if unit is not None else 2)
    across, down = page.tags.get(282), page.tags.get(283)
    if scale is None or across is None or down is None or 0 in (*across.value, *down.value):
        return None
    x, y = (scale * tag.value[1] / tag.value[0] for tag in (across, down))
    return (x, y) if x < 20 and y < 20 else None  # 72 dots an inch is a page setting, not a microscope's


def _texts(page: TiffPage) -> dict[str, str]:
    return {name: str(page.tags[code].value) for code, name in _TEXTS.items() if code in page.tags}
