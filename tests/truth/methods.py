"""The maps that are compared; each sees source and reference alone."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
from numpy.typing import NDArray

from hueferry.colour.spaces import SRGB_TO_XYZ_D50
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear
from hueferry.evidence.agree import agree
from hueferry.maps.protocol import Map
from hueferry.picture import Encoding, Picture

Pixels8 = NDArray[np.uint8]
Method = Callable[[Pixels8, Pixels8], tuple[Map | None, str]]


class PlainSrgb:
    """sRGB without a file's profile."""

    name = "sRGB"
    profile = None

    def to_xyz(self, codes):
        return srgb_to_linear(codes) @ SRGB_TO_XYZ_D50.T

    def from_xyz(self, xyz):
        return linear_to_srgb(xyz @ np.linalg.inv(SRGB_TO_XYZ_D50).T)


ENCODING: Encoding = PlainSrgb()


def picture_of(pixels: Pixels8) -> Picture:
    """Return sRGB pixels as a picture."""
    return Picture(pixels, ENCODING)


def _none(_: Pixels8, __: Pixels8) -> tuple[None, str]:
    return None, ""


def _agree(source: Pixels8, reference: Pixels8) -> tuple[Map, str]:
    map_, evidence = agree(picture_of(source), [picture_of(reference)])
    return map_, f"{evidence.basis.value}: expected {evidence.expected_error:.2f}, data {1 - evidence.prior_share:.2f}"


METHODS: Mapping[str, Method] = {"none": _none, "agree": _agree}
