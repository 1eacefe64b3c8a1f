"""A whole slide, or a folder of them: looked at, fitted, corrected window by window, written, and measured."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Mask
from hueferry.picture import Picture
from hueferry.slides.cautions import AMOUNT_IS_MEASURED, CAUTIONS
from hueferry.slides.density import Light
from hueferry.slides.fit import SlideFit, fit_slide
from hueferry.slides.gather import look_at_slide
from hueferry.slides.look import Look
from hueferry.slides.quality import compare, describe_slide, overlay, within
from hueferry.slides.readers import open_slide
from hueferry.slides.reference import SlideReference
from hueferry.slides.refuse import amount_is_measured
from hueferry.slides.settings import StainSettings, free_output, overlay_path
from hueferry.slides.write import write_corrected

_DERIVED = "Stain colours brought towards a reference (aim {})"


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
    target = free_output(path, out, chosen.layout)
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
        write_corrected(source, fit.table, target, chosen, derived=_DERIVED.format(chosen.aim.value))
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


def _write_overlay(look: Look, path: Path, settings: StainSettings) -> Path:
    from hueferry.colour.encoding import SRGB
    from hueferry.files.write import write

    return write(Picture(overlay(look), SRGB), path, overwrite=settings.overwrite)
