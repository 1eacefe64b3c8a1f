"""Names, shapes, units and ranges of the arrays that travel.

An alias says what an array *means*; the checks that it is so happen once, where a value is built.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

Colours: TypeAlias = NDArray[np.float64]
"""(n, 3) colours in a working space: Oklab L, a, b for pictures (L 0 … 1), optical density for slides."""

Codes: TypeAlias = NDArray[np.float64]
"""(n, 3) code values in a picture's own encoding, scaled so that 0 … 1 is the whole code range."""

Linear: TypeAlias = NDArray[np.float64]
"""(n, 3) linear light, red, green and blue, 1 = diffuse white."""

Xyz: TypeAlias = NDArray[np.float64]
"""(n, 3) CIE 1931 XYZ, Y = 1 for white; the white point is named by the function."""

Lab: TypeAlias = NDArray[np.float64]
"""(n, 3) CIELAB L* 0 … 100, a*, b* relative to the ICC's D50 white."""

Weights: TypeAlias = NDArray[np.float64]
"""(n,) shares, >= 0, summing to 1."""

Costs: TypeAlias = NDArray[np.float64]
"""(n, m) what it costs to carry one unit from source i to target j."""

Mask: TypeAlias = NDArray[np.bool_]
"""(height, width), true where a pixel counts."""

Pixels: TypeAlias = NDArray[Any]
"""(height, width, channels) in native depth: uint8, uint16 or float32.

Channels: 1 gray, 2 gray and alpha, 3 RGB, 4 RGBA.
"""

Lattice: TypeAlias = NDArray[np.float32]
"""(n, n, n, 3) output codes at the nodes of a table, indexed [red, green, blue]."""


def read_only(array: ArrayLike) -> NDArray[np.float64]:
    """Make a private float64 copy that nobody can write to."""
    copy = np.array(array, dtype=np.float64, copy=True, order="C")
    copy.flags.writeable = False
    return copy
