"""What slides are looked at with, and brought towards, gathered from files."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from hueferry.arrays import Mask
from hueferry.errors import InputError, RefusedError
from hueferry.slides.density import Light
from hueferry.slides.house import SUFFIX, read_house
from hueferry.slides.look import Look, look_at
from hueferry.slides.readers import find_slides, open_slide
from hueferry.slides.reference import SlideReference, reference_of
from hueferry.slides.refuse import reason_against
from hueferry.slides.source import SlideSource, thumbnail_of


def find_reference(to: Sequence[Path], *, light: Light = Light.ENCODED) -> SlideReference:
    """Return what slides are to be brought towards: a saved house palette, or one made of slides and folders.

    Raises:
        InputError: a house palette came with something else, or was made in other light; or no slide can be used.
    """
    if not any(path.suffix.lower() == SUFFIX for path in to):
        return reference_from(find_slides(to), light=light)
    if len(to) > 1:
        raise InputError("a saved house palette stands alone; name it and nothing else, or only slides")
    house = read_house(to[0])
    if house.light is not light:
        raise InputError(f"{to[0]} holds densities of {house.light.value} values; run with light {house.light.value}")
    return house


def look_at_slide(path: Path, source: SlideSource, *, light: Light, mask: Mask | None = None) -> Look:
    """Look at a slide's thumbnail, or refuse it.

    Raises:
        RefusedError: it is no bright-field slide.
    """
    look = look_at(thumbnail_of(source), source.encoding, bits=source.bits, light=light, mask=mask)
    top = np.float32(1.0 if look.thumbnail.dtype == np.float32 else 2**look.bits - 1)
    reason = reason_against(look.thumbnail.astype(np.float32) / top, look.regions)
    if reason is not None:
        raise RefusedError(path, reason)
    return look


def reference_from(paths: Sequence[Path], *, light: Light = Light.ENCODED) -> SlideReference:
    """Make a reference from slides; those that cannot be read are left out unless none can.

    Raises:
        InputError: no slide can be used; the message says why the last could not.
    """
    looks, last = [], ""
    for path in paths:
        try:
            source = open_slide(path)
            try:
                looks.append(look_at_slide(path, source, light=light))
            finally:
                source.close()
        except InputError as error:
            last = str(error)
    if not looks:
        raise InputError(f"no reference slide can be used; {last}")
    return reference_of(looks)
