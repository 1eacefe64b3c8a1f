"""Two encodings for the tests of tables: IEC 61966-2-1, and linear light of the same primaries."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.arrays import Codes, Xyz
from hueferry.colour.spaces import SRGB_TO_XYZ_D50
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear

INVERSE = np.linalg.inv(SRGB_TO_XYZ_D50)


@attrs.frozen
class Display:
    name: str = "display"
    profile: bytes | None = None

    def to_xyz(self, codes: Codes) -> Xyz:
        return srgb_to_linear(codes) @ SRGB_TO_XYZ_D50.T

    def from_xyz(self, xyz: Xyz) -> Codes:
        return linear_to_srgb(xyz @ INVERSE.T)


@attrs.frozen
class Light:
    name: str = "linear light"
    profile: bytes | None = None

    def to_xyz(self, codes: Codes) -> Xyz:
        return np.asarray(codes) @ SRGB_TO_XYZ_D50.T

    def from_xyz(self, xyz: Xyz) -> Codes:
        return xyz @ INVERSE.T
