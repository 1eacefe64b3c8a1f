"""Pyramidal BigTIFF, streamed: the full size goes straight to the file, smaller levels wait packed in a spool."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from enum import StrEnum
from pathlib import Path
from typing import IO, Any

import attrs
import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import InputError, OutputError
from hueferry.files.atomic import place
from hueferry.picture import Encoding
from hueferry.slides.codecs import CODECS, Packing
from hueferry.slides.levels import Cascade, Halving, Shape, level_shapes, tile_at

TILE = 256
"""Side of a tile; a multiple of 16 as TIFF asks."""

Bands = Iterator[Pixels]
"""Bands of `TILE` rows of the full size (the last may be lower), from the top."""


class Layout(StrEnum):
    """Where the smaller levels are; no layout suits every reader, so the user names it."""

    OME = "ome"
    """SubIFDs of the full size with OME-XML: OME-TIFF readers, libvips; OpenSlide sees the full size only."""
    FLAT = "flat"
    """Reduced pages in the main chain: OpenSlide, libvips, most viewers; not an OME-TIFF."""


@attrs.frozen(eq=False)
class SlideForm:
    """What the pixels of a slide are.

    Attributes:
        shape: rows and columns of the full size.
        dtype: uint8, uint16 or float32.
        encoding: how codes stand for colour; its profile is embedded.
        pitch: (x, y) micrometres a pixel, or None where it is not known.
    """

    shape: Shape
    dtype: np.dtype[Any]
    encoding: Encoding
    pitch: tuple[float, float] | None = None


@attrs.frozen(kw_only=True)
class TiffOptions:
    """How a slide is written.

    Attributes:
        layout: where smaller levels are.
        packing: how tiles are compressed.
        quality: of JPEG, 1 … 100.
        threads: tiles packed at the same time; the bytes do not depend on it.
        note: one sentence for the description, or empty.
    """

    layout: Layout = Layout.OME
    packing: Packing = Packing.JPEG
    quality: int = 90
    threads: int = 2
    note: str = ""


def write_tiff_slide(
    path: Path,
    bands: Bands,
    form: SlideForm,
    *,
    options: TiffOptions | None = None,
    overwrite: bool = False,
) -> Path:
    """Write a slide; it gets its name once every level has been read back.

    Args:
        path: the file.
        bands: the pixels.
        form: what they are.
        options: how it is written.
        overwrite: replace a file of that name.

    Raises:
        InputError: JPEG was asked for deeper pixels than 8 bit.
        OutputError: nothing can be written there, or what was written does not read back.
    """
    chosen = options or TiffOptions()
    if chosen.packing is Packing.JPEG and form.dtype != np.uint8:
        raise InputError(f"JPEG tiles hold 8 bit and the slide has {form.dtype}; choose lossless packing")
    plan = _Plan(level_shapes(form.shape, smallest=TILE), form.dtype, form.encoding, form.pitch, chosen)
    return place(
        path, lambda made: _store(made, bands, plan), overwrite=overwrite, verify=lambda made: _verify(made, path, plan)
    )


@attrs.frozen(eq=False)
class _Plan:
    shapes: list[Shape]
    dtype: np.dtype[Any]
    encoding: Encoding
    pitch: tuple[float, float] | None
    options: TiffOptions


@attrs.define(eq=False)
class _Spool:
    """Packed tiles of the smaller levels on disk, and where each is."""

    stream: IO[bytes]
    places: list[list[tuple[int, int]]]

    def add(self, level: int, packed: bytes) -> None:
        self.places[level].append((self.stream.seek(0, 2), len(packed)))
        self.stream.write(packed)

    def tiles(self, level: int) -> Iterator[bytes]:
        for offset, count in self.places[level]:
            self.stream.seek(offset)
            yield self.stream.read(count)


def _store(made: Path, bands: Bands, plan: _Plan) -> None:
    import tifffile

    with tempfile.TemporaryFile(dir=made.parent) as stream, ThreadPoolExecutor(max(1, plan.options.threads)) as pool:
        spool = _Spool(stream, [[] for _ in plan.shapes])
        with tifffile.TiffWriter(made, bigtiff=True, ome=False) as writer:
            writer.write(_full_size(bands, plan, spool, pool), **_tags(plan, 0))
            for level in range(1, len(plan.shapes)):
                writer.write(spool.tiles(level), **_tags(plan, level))


def _full_size(bands: Bands, plan: _Plan, spool: _Spool, pool: ThreadPoolExecutor) -> Iterator[bytes]:
    """Yield the packed tiles of the full size while the smaller levels are made."""
    encode, quality = CODECS[plan.options.packing].encode, plan.options.quality

    def pack(band: Pixels) -> Iterator[bytes]:
        return pool.map(lambda left: encode(tile_at(band, left, TILE), quality), range(0, band.shape[1], TILE))

    def keep(level: int, _: int, band: Pixels) -> None:
        for packed in pack(band):
            spool.add(level, packed)

    cascade = Cascade(plan.shapes, TILE, Halving(plan.encoding, plan.dtype), keep)
    rows = 0
    for band in bands:
        rows += band.shape[0]
        packed = pack(band)
        cascade.add(band)
        yield from packed
    if rows != plan.shapes[0][0]:
        raise InputError(f"{rows} rows came where the slide has {plan.shapes[0][0]}")


def _tags(plan: _Plan, level: int) -> dict[str, Any]:
    from hueferry.slides.ome import describe

    codec, layout = CODECS[plan.options.packing], plan.options.layout
    height, width = plan.shapes[level]
    tags: dict[str, Any] = {
        "shape": (height, width, 3),
        "dtype": plan.dtype,
        "tile": (TILE, TILE),
        "photometric": codec.photometric,
        "planarconfig": "contig",
        "compression": codec.compression,
        "predictor": codec.predictor if plan.dtype != np.float32 else 1,
        "metadata": None,
        "software": False,
        "iccprofile": plan.encoding.profile,
    }
    if codec.photometric == "ycbcr":
        tags["subsampling"] = (1, 1)
    if plan.pitch is not None:
        scale = (width / plan.shapes[0][1], height / plan.shapes[0][0])
        tags["resolution"] = tuple(1e4 / pitch * part for pitch, part in zip(plan.pitch, scale, strict=True))
        tags["resolutionunit"] = "CENTIMETER"
    if level > 0:
        tags["subfiletype"] = 1
    elif layout is Layout.OME:
        tags["subifds"] = len(plan.shapes) - 1
        tags["description"] = describe(plan.shapes[0], plan.dtype.name, plan.pitch, note=plan.options.note)
    elif plan.options.note:
        tags["description"] = plan.options.note
    return tags


def _verify(made: Path, path: Path, plan: _Plan) -> None:
    """Read the finished file back: every level there, every tile in its place, the corners decoded."""
    from hueferry.errors import PictureError
    from hueferry.picture import Window
    from hueferry.slides.tiff_reader import TiffSlide

    try:
        slide = TiffSlide(made)
        try:
            if list(slide.levels) != plan.shapes:
                raise OutputError(path, f"the levels read back as {list(slide.levels)} instead of {plan.shapes}")
            for level, (height, width) in enumerate(plan.shapes):
                slide.check_tiles(level)
                slide.read_level(level, Window(0, 0, 1, 1))
                slide.read_level(level, Window(height - 1, width - 1, 1, 1))
        finally:
            slide.close()
    except PictureError as error:
        raise OutputError(path, f"what was written does not read back: {error.reason}") from error
