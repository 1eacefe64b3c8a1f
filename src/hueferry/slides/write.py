"""A slide through a table: read, mapped and written window by window, so that nothing holds a level whole."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
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

_WIDE = 1 << 16
"""Columns above which one band at a time is read ahead, so that memory stays bounded."""


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
    """Yield the corrected full size in bands of `TILE` rows; read and mapped by threads, a few at a time."""
    from hueferry.applying.engine import Engine

    height, width = source.shape
    engine = Engine(table, source.read(Window(0, 0, 1, 1)).dtype, source.bits)

    def work(top: int) -> Pixels:
        return engine.apply(source.read(Window(top, 0, min(TILE, height - top), width)), top=top)

    ahead = 1 if width > _WIDE else max(1, threads)
    with ThreadPoolExecutor(max(1, threads)) as pool:
        pending: deque[Future[Pixels]] = deque()
        for top in range(0, height, TILE):
            pending.append(pool.submit(work, top))
            if len(pending) > ahead:
                yield pending.popleft().result()
        while pending:
            yield pending.popleft().result()
