"""Maps made of maps."""

from __future__ import annotations

import attrs

from hueferry.arrays import Colours
from hueferry.maps.protocol import Map


@attrs.frozen(eq=False)
class Composed:
    """One map after another: x ↦ second(first(x))."""

    first: Map
    second: Map

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        return self.second(self.first(colours))


@attrs.frozen(eq=False)
class Partial:
    """Part of the way along the displacement interpolation: x ↦ (1 − t) x + t map(x) (McCann 1997).

    Attributes:
        whole: the map.
        strength: t, 0 … 1.
    """

    whole: Map
    strength: float = attrs.field(validator=[attrs.validators.ge(0.0), attrs.validators.le(1.0)])

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        return colours + self.strength * (self.whole(colours) - colours)
