"""A table onto pixels: native depth in, native depth out, any windows and any number of threads, the same bytes.

Rules:

* Integers are rounded to the nearest code and clipped to the code range. Dithering only on request (`dither`).
* Alpha is copied bit for bit.
* A table that leaves every code alone leaves every bit of every pixel alone.
* Gray stays gray: each gray becomes the gray of the luminance that the table gives it.
* Floats beyond 0 … 1 keep the shift of the nearest point inside, so that nothing jumps at the border; results are
  not clipped. A float pixel with a channel that is not finite stays as it is, all channels of it.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path

import attrs
import numpy as np
from numpy.typing import DTypeLike

from hueferry.applying.dither import round_dithered
from hueferry.applying.gray import integer_gray_curve, map_float_grays
from hueferry.applying.processor import DEPTHS, FLOAT, make_processor, run_processor
from hueferry.arrays import Pixels
from hueferry.errors import InputError
from hueferry.files.exif import without_thumbnail
from hueferry.picture import Encoding, Picture, PictureSink, PictureSource, Window, strips
from hueferry.tables.identity import is_identity
from hueferry.tables.table import Table
from hueferry.threads import processors

STRIP = 1 << 18
"""Pixels of a strip: source and result of one stay in the cache."""


class Engine:
    """A table made ready for pixels of one kind. Immutable; any number of threads may use it at once."""

    def __init__(
        self,
        table: Table,
        dtype: DTypeLike,
        bits: int,
        *,
        encoding: Encoding | None = None,
        dither: bool = False,
    ) -> None:
        """Make a table ready.

        Args:
            table: the table.
            dtype: uint8, uint16 or float32.
            bits: significant bits a channel of integer pixels.
            encoding: needed for gray pixels only.
            dither: round 8-bit results by the place of the pixel instead of to the nearest code.

        Raises:
            InputError: there are no such pixels.
        """
        self.dtype = np.dtype(dtype)
        if self.dtype not in (np.uint8, np.uint16, np.float32) or (self.dtype != np.float32 and not 1 <= bits <= 16):
            raise InputError(f"pixels are uint8, uint16 or float32 of 1 … 16 bits, not {self.dtype} of {bits}")
        self._table, self._bits, self._encoding = table, bits, encoding
        self._dither = dither and self.dtype == np.uint8
        self._idle = is_identity(table)
        direct = DEPTHS.get(bits) if self.dtype != np.float32 else FLOAT
        self._reads = direct if direct is not None else FLOAT
        self._writes = FLOAT if self._dither else self._reads
        self._processor = make_processor(table, reads=self._reads, writes=self._writes)
        gray = encoding is not None and self.dtype != np.float32
        self._gray = integer_gray_curve(table, encoding, bits=bits) if gray and encoding is not None else None

    def apply(self, pixels: Pixels, into: Pixels | None = None, *, top: int = 0, left: int = 0) -> Pixels:
        """Return pixels sent through the table.

        Args:
            pixels: (height, width, 1 … 4) of the engine's dtype; not changed.
            into: where the result goes, of the same shape and dtype; None makes a new array.
            top: row of the window in its picture; matters to dithering only.
            left: its column.

        Raises:
            InputError: the pixels are of another kind than the engine.
        """
        if pixels.dtype != self.dtype:
            raise InputError(f"this engine takes {self.dtype} pixels, not {pixels.dtype}")
        result = np.empty(pixels.shape, pixels.dtype) if into is None else into
        if self._idle:
            result[...] = pixels
        elif pixels.shape[2] <= 2:
            self._apply_gray(pixels, result)
        elif not result.flags.c_contiguous:
            result[...] = self._colour(np.ascontiguousarray(pixels), np.empty(pixels.shape, pixels.dtype), top, left)
        else:
            self._colour(np.ascontiguousarray(pixels), result, top, left)
        return result

    def _colour(self, pixels: Pixels, result: Pixels, top: int, left: int) -> Pixels:
        if self._dither:
            self._run_dithered(pixels, result, top, left)
        elif self._reads != FLOAT or self.dtype == np.float32:
            run_processor(self._processor, pixels, result, reads=self._reads, writes=self._writes)
        else:
            self._run_odd_depth(pixels, result)
        if self.dtype == np.float32:
            _keep_beyond(pixels, result)
        return result

    def _run_odd_depth(self, pixels: Pixels, result: Pixels) -> None:
        """Depths that the processor does not know go through float, scaled by their own top code."""
        scale = np.float32(2**self._bits - 1)
        codes = pixels.astype(np.float32) / scale
        mapped = np.empty_like(codes)
        run_processor(self._processor, codes, mapped, reads=FLOAT, writes=FLOAT)
        result[:, :, :3] = np.rint(np.clip(mapped[:, :, :3], 0.0, 1.0) * scale)
        result[:, :, 3:] = pixels[:, :, 3:]

    def _run_dithered(self, pixels: Pixels, result: Pixels, top: int, left: int) -> None:
        mapped = np.empty(pixels.shape, np.float32)
        run_processor(self._processor, pixels, mapped, reads=self._reads, writes=FLOAT)
        result[:, :, :3] = round_dithered(mapped[:, :, :3], top=top, left=left)
        result[:, :, 3:] = pixels[:, :, 3:]

    def _apply_gray(self, pixels: Pixels, result: Pixels) -> None:
        if self._encoding is None:
            raise InputError("gray pixels need an encoding, which says how bright a colour is; give it to the engine")
        if self._gray is None:
            result[:, :, 0] = map_float_grays(pixels[:, :, 0], self._table, self._encoding)
        else:
            result[:, :, 0] = self._gray[np.minimum(pixels[:, :, 0], len(self._gray) - 1)]
        result[:, :, 1:] = pixels[:, :, 1:]


def _keep_beyond(pixels: Pixels, result: Pixels) -> None:
    """Let floats beyond 0 … 1 keep the shift of the nearest point inside, and pixels that are not finite stay."""
    lowest, highest = float(pixels.min()), float(pixels.max())
    if lowest >= 0.0 and highest <= 1.0:  # false for NaN
        return
    colour = pixels[:, :, :3]
    finite = np.isfinite(colour).all(axis=2, keepdims=True)
    with np.errstate(invalid="ignore"):
        beyond = colour - np.clip(colour, 0.0, 1.0)
    result[:, :, :3] = np.where(finite, result[:, :, :3] + np.where(finite, beyond, 0.0), colour)


def apply_table(table: Table, picture: Picture, *, dither: bool = False, threads: int | None = None) -> Picture:
    """Return a picture sent through a table; depth, encoding and metadata stay.

    Args:
        table: the table, made for the picture's encoding.
        picture: the picture.
        dither: see `Engine`.
        threads: how many to use; None takes every processor this process may use. Results do not depend on it.
    """
    engine = Engine(table, picture.pixels.dtype, picture.bits, encoding=_for_gray(picture), dither=dither)
    result = np.empty(picture.pixels.shape, picture.pixels.dtype)
    windows = list(strips(picture.shape, rows_of_strip(picture.shape[1])))

    def work(window: Window) -> None:
        rows = slice(window.top, window.top + window.height)
        engine.apply(picture.pixels[rows], result[rows], top=window.top)

    count = min(processors() if threads is None else threads, len(windows))
    if count <= 1:
        for window in windows:
            work(window)
    else:
        with ThreadPoolExecutor(count) as pool:
            deque(pool.map(work, windows), maxlen=0)
    metadata = picture.metadata
    metadata = attrs.evolve(metadata, exif=without_thumbnail(metadata.exif)) if metadata.exif else metadata
    return attrs.evolve(picture, pixels=result, metadata=metadata)


def apply_windows(
    table: Table, source: PictureSource, sink: PictureSink, *, rows: int | None = None, threads: int | None = None
) -> Path:
    """Send a picture through a table window by window and return the file that the sink made.

    Windows are read and mapped by threads and written in order by the caller's own; only a few are in memory.

    Args:
        table: the table, made for the source's encoding.
        source: where pixels come from.
        sink: where they go; closed at the end.
        rows: rows of a window; None chooses.
        threads: how many to use; None takes every processor this process may use.
    """
    windows = strips(source.shape, rows_of_strip(source.shape[1]) if rows is None else rows)
    first = next(windows)
    pixels = source.read(first)
    gray = source.encoding if pixels.shape[2] <= 2 else None
    engine = Engine(table, pixels.dtype, source.bits, encoding=gray)
    sink.write(first, engine.apply(pixels, top=first.top, left=first.left))
    count = processors() if threads is None else max(1, threads)
    with ThreadPoolExecutor(count) as pool:
        for window, mapped in _in_order(pool, engine, source, windows, ahead=count + 1):
            sink.write(window, mapped)
    return sink.close()


def _in_order(
    pool: ThreadPoolExecutor, engine: Engine, source: PictureSource, windows: Iterator[Window], *, ahead: int
) -> Iterator[tuple[Window, Pixels]]:
    def work(window: Window) -> Pixels:
        return engine.apply(source.read(window), top=window.top, left=window.left)

    pending: deque[tuple[Window, Future[Pixels]]] = deque()
    for window in windows:
        pending.append((window, pool.submit(work, window)))
        if len(pending) >= ahead:
            done, future = pending.popleft()
            yield done, future.result()
    while pending:
        done, future = pending.popleft()
        yield done, future.result()


def _for_gray(picture: Picture) -> Encoding | None:
    return picture.encoding if picture.is_gray else None


def rows_of_strip(width: int) -> int:
    """Return how many rows of `width` pixels make a strip."""
    return max(1, STRIP // width)
