"""The maps that are compared; each sees source and reference alone."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import partial
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours
from hueferry.colour.encoding import SRGB, from_oklab, to_oklab
from hueferry.evidence.agree import agree
from hueferry.maps.method import Method
from hueferry.maps.methods import FITTERS, fit_map
from hueferry.maps.protocol import Map
from hueferry.palettes.build import palette_of
from hueferry.picture import Picture

Pixels8 = NDArray[np.uint8]
Solver = Callable[[Pixels8, Pixels8], tuple[Map | None, str]]


def picture_of(pixels: Pixels8) -> Picture:
    """Return sRGB pixels as a picture."""
    return Picture(pixels, SRGB)


def _none(_: Pixels8, __: Pixels8) -> tuple[None, str]:
    return None, ""


def _agree(source: Pixels8, reference: Pixels8) -> tuple[Map, str]:
    map_, evidence = agree(picture_of(source), [picture_of(reference)])
    return map_, f"{evidence.basis.value}: expected {evidence.expected_error:.2f}, data {1 - evidence.prior_share:.2f}"


def _shipped(source: Pixels8, reference: Pixels8) -> tuple[Map, str]:
    """Return the table that `match` would apply, gamut, safety and all, as a map."""
    from hueferry.fitting.fit import fit_picture
    from hueferry.fitting.reference import Reference
    from hueferry.fitting.settings import Settings
    from hueferry.tables.lookup import look_up

    fit = fit_picture(picture_of(source), [Reference.of_picture(picture_of(reference), "reference")], Settings())

    def through_table(colours: Colours) -> Colours:
        codes = np.clip(from_oklab(SRGB, colours), 0, 1)
        return to_oklab(SRGB, np.clip(look_up(fit.table, codes), 0, 1))

    return through_table, f"{fit.evidence.basis.value}; {len(fit.sentences)} sentences"


def _transport(method: Method, source: Pixels8, reference: Pixels8) -> tuple[Map, str]:
    return fit_map(palette_of(picture_of(source)), palette_of(picture_of(reference)), method=method), ""


METHODS: Mapping[str, Solver] = MappingProxyType(
    {
        "none": _none,
        **{method.value: partial(_transport, method) for method in FITTERS},
        "agree": _agree,
        "shipped": _shipped,
    }
)
