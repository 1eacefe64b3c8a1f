"""The affine map, and the one that moves nothing."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only


@attrs.frozen(eq=False)
class AffineMap:
    """x ↦ matrix · x + offset.

    Attributes:
        matrix: (3, 3).
        offset: (3,).
    """

    matrix: NDArray[np.float64] = attrs.field(converter=read_only)
    offset: NDArray[np.float64] = attrs.field(converter=read_only)

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        return np.asarray(colours @ self.matrix.T + self.offset)


IDENTITY = AffineMap(np.eye(3), np.zeros(3))
"""The map that moves nothing."""
