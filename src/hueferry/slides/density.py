"""Optical density against a slide's own glass."""

from __future__ import annotations

from enum import StrEnum

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Colours, read_only
from hueferry.colour.spaces import SRGB_TO_XYZ_D50
from hueferry.errors import InputError
from hueferry.picture import Encoding

FLOOR = 0.25 / 255
"""Light below which a density says nothing: a quarter of an 8-bit code, so that black rounds to black."""

_TO_RGB = np.asarray(np.linalg.inv(SRGB_TO_XYZ_D50), dtype=np.float64)


class Light(StrEnum):
    """What Beer–Lambert's law is applied to."""

    ENCODED = "encoded"
    """Code values as they are: the practice of most published work on stained sections."""
    LINEAR = "linear"
    """Linear light by the slide's profile, on the primaries of sRGB."""


@attrs.frozen(eq=False)
class Density:
    """Codes to optical density, and back: OD = −log10(light / light of the glass) in each channel.

    Attributes:
        glass: (3,) codes of the bare glass, 0 … 1.
        encoding: how codes stand for colour.
        light: what the law is applied to.

    References:
        Ruifrok & Johnston (2001), Analytical and Quantitative Cytology and Histology 23, 291–299.
    """

    glass: NDArray[np.float64] = attrs.field(converter=read_only)
    encoding: Encoding
    light: Light = Light.ENCODED

    @glass.validator
    def _check_glass(self, _: object, value: NDArray[np.float64]) -> None:
        if value.shape != (3,) or not np.isfinite(value).all() or (value <= FLOOR).any() or (value > 1.5).any():
            raise InputError(f"glass must be three codes between 0 and 1, not {value}; the slide has no light")

    def of(self, codes: Codes) -> Colours:
        """Return the (n, 3) optical density of (n, 3) codes; brighter than the glass is negative."""
        return np.asarray(-np.log10(np.maximum(self._light(codes), FLOOR) / self._white()))

    def codes(self, density: Colours) -> Codes:
        """Return the (n, 3) codes of (n, 3) optical densities, not clipped."""
        light = self._white() * 10.0 ** -np.clip(density, -2.0, 12.0)
        if self.light is Light.ENCODED:
            return np.asarray(light)
        return np.asarray(self.encoding.from_xyz(light @ SRGB_TO_XYZ_D50.T))

    def _light(self, codes: Codes) -> Codes:
        if self.light is Light.ENCODED:
            return codes
        return np.asarray(self.encoding.to_xyz(codes) @ _TO_RGB.T)

    def _white(self) -> NDArray[np.float64]:
        return np.asarray(np.maximum(self._light(self.glass[None, :])[0], FLOOR))
