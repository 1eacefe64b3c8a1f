"""A whole slide, or a folder of them: looked at, fitted, corrected window by window, written, and measured."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path
from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Mask, Pixels
from hueferry.errors import OutputError
from hueferry.picture import Picture, Window
from hueferry.slides.cautions import AMOUNT_IS_MEASURED, CAUTIONS
from hueferry.slides.codecs import Packing
from hueferry.slides.density import Light
from hueferry.slides.fit import SlideFit, fit_slide
from hueferry.slides.gather import look_at_slide
from hueferry.slides.look import Look
from hueferry.slides.quality import compare, describe_slide, overlay, within
from hueferry.slides.readers import open_slide
from hueferry.slides.reference import SlideReference
from hueferry.slides.refuse import amount_is_measured
from hueferry.slides.settings import Container, StainSettings, output_path, overlay_path
from hueferry.slides.source import SlideSource
from hueferry.slides.tiff_writer import TILE, Layout, SlideForm, TiffOptions, write_tiff_slide

_WIDE = 1 << 16
"""Columns above which one band at a time is read ahead, so that memory stays bounded."""


@attrs.frozen(eq=False)
class SlideOutcome:
    """What happened to one slide.

    Attributes:
        source: the file or folder read.
        output: what was written; None if the slide was only measured.
        overlay: the thumbnail with its tissue outlined; None if nothing was written.
        fit: the correction; None if the slide was only measured without one.
        numbers: figures before and after, certificate: JSON values.
        sentences: what was done and why.
        cautions: what must be told with it.
    """

    source: Path
    output: Path | None
    overlay: Path | None
    fit: SlideFit | None
    numbers: dict[str, Any]
    sentences: tuple[str, ...]
    cautions: tuple[str, ...] = CAUTIONS


@attrs.frozen
class SlideFailure:
    """A slide that could not be done, and why."""

    source: Path
    reason: str


def stain_slide(
    path: Path, reference: SlideReference, out: Path, *, settings: StainSettings | None = None, mask: Mask | None = None
) -> SlideOutcome:
    """Bring one slide towards a reference.

    Args:
        path: the slide.
        reference: what it is brought towards.
        out: folder that outputs go to.
        settings: how.
        mask: (rows, columns) of the thumbnail, true where tissue may be.

    Raises:
        RefusedError: it is no bright-field slide.
        PictureError: it cannot be read.
        OutputError: the output's name is taken, or nothing can be written there.
    """
    chosen = settings or StainSettings()
    target = output_path(path, out, chosen.layout)
    if target.resolve() == path.resolve():
        raise OutputError(target, "this is the original, which is never overwritten; name another folder")
    source = open_slide(path)
    try:
        look = look_at_slide(path, source, light=chosen.light, mask=mask)
        fit = fit_slide(
            look, reference, aim=chosen.aim, strength=chosen.strength, max_gain=chosen.max_gain, method=chosen.method
        )
        numbers = _numbers(look, fit, reference)
        held_back = amount_is_measured(look.density) and not chosen.correct_measured
        sentences = (f"optical density of {chosen.light.value} values", *fit.sentences)
        if chosen.measure_only or held_back:
            said = (*sentences, AMOUNT_IS_MEASURED) if held_back else sentences
            return SlideOutcome(path, None, None, fit, numbers, said)
        _write(source, fit, target, chosen)
        shown = overlay_path(path, out)
        return SlideOutcome(path, target, _write_overlay(look, shown, chosen), fit, numbers, sentences)
    finally:
        source.close()


def measure_slide(path: Path, *, light: Light = Light.ENCODED) -> dict[str, Any]:
    """Return the figures of one slide, without a reference.

    Raises:
        RefusedError: it is no bright-field slide.
        PictureError: it cannot be read.
    """
    source = open_slide(path)
    try:
        return describe_slide(look_at_slide(path, source, light=light))
    finally:
        source.close()


def _numbers(look: Look, fit: SlideFit, reference: SlideReference) -> dict[str, Any]:
    from hueferry.applying.engine import Engine

    engine = Engine(fit.table, look.thumbnail.dtype, look.bits)
    after = within(look, engine.apply(np.ascontiguousarray(look.thumbnail)))
    return {**compare(look, after, reference), "basis": fit.basis, "certificate": fit.certificate.as_dict()}


def _write(source: SlideSource, fit: SlideFit, target: Path, settings: StainSettings) -> None:
    dtype = source.read(Window(0, 0, 1, 1)).dtype
    form = SlideForm(source.shape, dtype, source.encoding, source.facts.pitch)
    bands = corrected_bands(source, fit, threads=settings.threads)
    if settings.layout is Container.ZARR:
        from hueferry.slides.zarr_writer import write_zarr_slide

        write_zarr_slide(target, bands, form, threads=settings.threads, overwrite=settings.overwrite)
        return
    packing = settings.packing or (Packing.JPEG if dtype == np.uint8 else Packing.DEFLATE)
    options = TiffOptions(
        layout=Layout(settings.layout.value), packing=packing, quality=settings.quality, threads=settings.threads,
        note=_note(source, settings),
    )  # fmt: skip
    write_tiff_slide(target, bands, form, options=options, overwrite=settings.overwrite)


def _note(source: SlideSource, settings: StainSettings) -> str:
    derived = (
        f"Derived: stain colours brought towards a reference (aim {settings.aim.value}) by hueferry. {CAUTIONS[0]}"
    )
    if not settings.keep_texts:
        return derived
    texts = "; ".join(f"{name}: {text}" for name, text in source.facts.texts.items())
    plain = "".join(character if 32 <= ord(character) < 127 else " " for character in texts)
    return f"{derived} Source: {plain}"


def corrected_bands(source: SlideSource, fit: SlideFit, *, threads: int = 2) -> Iterator[Pixels]:
    """Yield the corrected full size in bands of `TILE` rows; read and mapped by threads, a few at a time."""
    from hueferry.applying.engine import Engine

    height, width = source.shape
    engine = Engine(fit.table, source.read(Window(0, 0, 1, 1)).dtype, source.bits)

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


def _write_overlay(look: Look, path: Path, settings: StainSettings) -> Path:
    from hueferry.colour.encoding import SRGB
    from hueferry.files.write import write

    return write(Picture(overlay(look), SRGB), path, overwrite=settings.overwrite)
