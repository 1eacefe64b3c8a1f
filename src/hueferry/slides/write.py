"""A slide through a table: read, mapped and written window by window, so that nothing holds a level whole."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from itertools import pairwise
from pathlib import Path

import numpy as np

from hueferry.arrays import Pixels
from hueferry.picture import Window
from hueferry.slides.cautions import CAUTIONS
from hueferry.slides.codecs import Packing
from hueferry.slides.readers import open_slide
from hueferry.slides.settings import Container, StainSettings, free_output
from hueferry.slides.source import SlideSource
from hueferry.slides.tiff_writer import TILE, Layout, SlideForm, TiffOptions, write_tiff_slide
from hueferry.tables.table import Table

_WIDEST = 4096
"""Columns of a block, at most."""


def write_corrected(source: SlideSource, table: Table, target: Path, settings: StainSettings, *, derived: str) -> Path:
    """Write what a table makes of a slide, window by window.

    Args:
        source: the slide.
        table: codes to codes.
        target: the file or folder to make.
        settings: layout, packing, threads.
        derived: what was done, in half a sentence, for the description.

    Raises:
        PictureError: the slide is broken somewhere.
        OutputError: the name is taken, or nothing can be written there.
    """
    dtype = source.read(Window(0, 0, 1, 1)).dtype
    form = SlideForm(source.shape, dtype, source.encoding, source.facts.pitch)
    bands = corrected_bands(source, table, threads=settings.threads)
    if settings.layout is Container.ZARR:
        from hueferry.slides.zarr_writer import write_zarr_slide

        write_zarr_slide(target, bands, form, threads=settings.threads, overwrite=settings.overwrite)
        return target
    packing = settings.packing or (Packing.JPEG if dtype == np.uint8 else Packing.DEFLATE)
    options = TiffOptions(
        layout=Layout(settings.layout.value), packing=packing, quality=settings.quality, threads=settings.threads,
        note=_note(source, settings, derived),
    )  # fmt: skip
    return write_tiff_slide(target, bands, form, options=options, overwrite=settings.overwrite)


def _note(source: SlideSource, settings: StainSettings, derived: str) -> str:
    derived = f"Derived: {derived} by hueferry. {CAUTIONS[0]}"
    if not settings.keep_texts:
        return derived
    texts = "; ".join(f"{name}: {text}" for name, text in source.facts.texts.items())
    plain = "".join(character if 32 <= ord(character) < 127 else " " for character in texts)
    return f"{derived} Source: {plain}"


def map_slide(path: Path, table: Table, out: Path, settings: StainSettings) -> Path:
    """Send a slide through a table, and return where the result is; nothing is looked at or fitted.

    Raises:
        PictureError: it cannot be read.
        OutputError: the output's name is taken, or nothing can be written there.
    """
    target = free_output(path, out, settings.layout)
    source = open_slide(path)
    try:
        return write_corrected(source, table, target, settings, derived="Colours sent through a saved map")
    finally:
        source.close()


def corrected_bands(source: SlideSource, table: Table, *, threads: int = 2) -> Iterator[Pixels]:
    """Yield the corrected full size in bands of `TILE` rows, each made by all threads while the one before is written.

    What is held is two bands, and for each thread a block of one.
    """
    from hueferry.applying.engine import Engine

    height, width = source.shape
    engine = Engine(table, source.read(Window(0, 0, 1, 1)).dtype, source.bits)
    blocks = _blocks(width, max(1, threads))

    def fill(band: Pixels, top: int, left: int, right: int) -> None:
        window = Window(top, left, band.shape[0], right - left)
        band[:, left:right] = engine.apply(source.read(window), top=top, left=left)

    def begin(top: int) -> tuple[Pixels, list[Future[None]]]:
        band = np.empty((min(TILE, height - top), width, 3), engine.dtype)
        return band, [pool.submit(fill, band, top, left, right) for left, right in pairwise(blocks)]

    with ThreadPoolExecutor(max(1, threads)) as pool:
        waiting = begin(0)
        for top in range(TILE, height + TILE, TILE):
            band, futures = waiting
            for future in futures:
                future.result()
            if top < height:
                waiting = begin(top)
            yield band


def _blocks(width: int, threads: int) -> list[int]:
    """Return the columns where blocks of a band begin, and its end: one block a thread, of whole tiles, none wide."""
    step = min(_WIDEST, -(-width // (threads * TILE)) * TILE)
    return [*range(0, width, step), width]
