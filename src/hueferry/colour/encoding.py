"""Encodings made of a tone curve a channel and a matrix, and the way from codes to Oklab and back."""

from __future__ import annotations

from functools import cached_property

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Colours, Xyz, read_only
from hueferry.colour.curves import SRGB_CURVE, Curve, Parametric
from hueferry.colour.spaces import (
    SRGB_TO_XYZ_D50,
    WHITE_D50,
    WHITE_D65,
    adaptation,
    oklab_to_xyz,
    primaries_to_xyz,
    xyz_to_oklab,
)
from hueferry.picture import Encoding


@attrs.frozen(eq=False)
class MatrixEncoding:
    """Codes through one tone curve a channel to linear RGB, and through a matrix to XYZ.

    Attributes:
        name: for people.
        curves: red, green, blue.
        matrix: (3, 3) linear RGB to XYZ relative to the ICC's D50; invertible.
        profile: the ICC profile the picture came with, byte for byte, or None.
    """

    name: str
    curves: tuple[Curve, Curve, Curve]
    matrix: NDArray[np.float64] = attrs.field(converter=read_only)
    profile: bytes | None = attrs.field(default=None, repr=False)

    def to_xyz(self, codes: Codes) -> Xyz:
        """Turn (n, 3) codes into XYZ (D50)."""
        linear = np.stack([curve.decode(codes[:, channel]) for channel, curve in enumerate(self.curves)])
        return np.asarray((self.matrix @ linear).T)

    def from_xyz(self, xyz: Xyz) -> Codes:
        """Turn (n, 3) XYZ (D50) into codes, not clipped."""
        linear = self._inverse @ xyz.T
        return np.stack([curve.encode(channel) for channel, curve in zip(linear, self.curves, strict=True)]).T

    @cached_property
    def _inverse(self) -> NDArray[np.float64]:
        return np.asarray(np.linalg.inv(self.matrix))


def _of_primaries(
    name: str, red: tuple[float, float], green: tuple[float, float], blue: tuple[float, float], *, curve: Curve
) -> MatrixEncoding:
    to_xyz = primaries_to_xyz(np.array(red), np.array(green), np.array(blue), WHITE_D65)
    return MatrixEncoding(name, (curve, curve, curve), adaptation(WHITE_D65, WHITE_D50) @ to_xyz)


SRGB = MatrixEncoding("sRGB", (SRGB_CURVE, SRGB_CURVE, SRGB_CURVE), SRGB_TO_XYZ_D50)
"""IEC 61966-2-1, relative to the ICC's D50."""

LINEAR_SRGB = MatrixEncoding("linear sRGB", (Parametric(1.0), Parametric(1.0), Parametric(1.0)), SRGB_TO_XYZ_D50)
"""The primaries of sRGB in linear light."""

DISPLAY_P3 = _of_primaries("Display P3", (0.680, 0.320), (0.265, 0.690), (0.150, 0.060), curve=SRGB_CURVE)
"""The primaries of SMPTE EG 432-1 with D65 and the curve of sRGB."""

BT2020 = _of_primaries(
    "BT.2020",
    (0.708, 0.292),
    (0.170, 0.797),
    (0.131, 0.046),
    curve=Parametric(1 / 0.45, 1 / 1.09929682680944, 0.09929682680944 / 1.09929682680944, 1 / 4.5, 0.081242858298635),
)
"""ITU-R BT.2020 with the curve of its clause on non-linear transfer."""

ROMM = MatrixEncoding(
    "ROMM RGB",
    (Parametric(1.8, 1.0, 0.0, 1 / 16, 16 / 512),) * 3,
    primaries_to_xyz(np.array([0.7347, 0.2653]), np.array([0.1596, 0.8404]), np.array([0.0366, 0.0001]), WHITE_D50),
)
"""ISO 22028-2: gamma 1.8 with a linear piece below 1/512 of linear light."""


def to_oklab(encoding: Encoding, codes: Codes) -> Colours:
    """Turn (n, 3) codes in `encoding` into Oklab."""
    return xyz_to_oklab(encoding.to_xyz(codes))


def from_oklab(encoding: Encoding, colours: Colours) -> Codes:
    """Turn (n, 3) Oklab colours into codes in `encoding`, not clipped."""
    return encoding.from_xyz(oklab_to_xyz(colours))
