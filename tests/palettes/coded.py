"""A plain encoding for tests of counting and reduction."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.colour.spaces import SRGB_TO_XYZ_D50
from hueferry.colour.transfer import srgb_to_linear


@attrs.frozen
class Coded:
    """An encoding on the primaries of IEC 61966-2-1, with its curve or with none."""

    curved: bool = True
    name: str = "test"
    profile: bytes | None = None

    def to_xyz(self, codes):
        return (srgb_to_linear(codes) if self.curved else np.asarray(codes)) @ SRGB_TO_XYZ_D50.T

    def from_xyz(self, xyz):
        raise NotImplementedError
