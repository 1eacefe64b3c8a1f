"""Light beyond diffuse white: carried as the same colour is at diffuse white."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.arrays import Colours
from hueferry.maps.protocol import Map


@attrs.frozen(eq=False)
class BeyondWhite:
    """A map that gives a highlight the gain that its colour has at the lightness of diffuse white.

    Oklab is homogeneous: k times the light is the cube root of k times L, a and b. So x ↦ s · map(x / s), with
    s = max(L, 1), multiplies light beyond diffuse white as the light of its colour at diffuse white; below, and at
    it, nothing changes. A map that was found on what lies below answers for lamps and suns without being stretched.

    Attributes:
        below: the map of colours up to L = 1.
    """

    below: Map

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        size = np.maximum(np.asarray(colours, dtype=np.float64)[:, :1], 1.0)
        return np.asarray(size * self.below(colours / size))
