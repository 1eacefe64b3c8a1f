"""Transfer curves: code values to linear light and back.

Curves are odd functions: a code below zero mirrors the one above, so that out-of-gamut values survive a round trip.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray


def srgb_to_linear(codes: NDArray[Any]) -> NDArray[np.float64]:
    """Decode IEC 61966-2-1 codes (any shape, 0 … 1) to linear light, with the standard's own rounded constants."""
    magnitude = np.abs(np.asarray(codes, dtype=np.float64))
    linear = np.where(magnitude <= 0.04045, magnitude / 12.92, ((magnitude + 0.055) / 1.055) ** 2.4)
    return np.asarray(np.copysign(linear, codes))


def linear_to_srgb(linear: NDArray[Any]) -> NDArray[np.float64]:
    """Encode linear light (any shape, 0 … 1) to IEC 61966-2-1 codes; inverse of `srgb_to_linear` within 3e-8."""
    magnitude = np.abs(np.asarray(linear, dtype=np.float64))
    codes = np.where(magnitude <= 0.0031308, magnitude * 12.92, 1.055 * magnitude ** (1 / 2.4) - 0.055)
    return np.asarray(np.copysign(codes, linear))
