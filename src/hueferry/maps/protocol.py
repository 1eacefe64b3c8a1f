"""What every map is."""

from __future__ import annotations

from typing import Protocol

from hueferry.arrays import Colours


class Map(Protocol):
    """Colour to colour, in one working space.

    A map is pure: the same colours give the same colours, in any number, order and thread. It answers for every
    finite colour, also outside the palette it was fitted to, and never returns NaN.
    """

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over; returns a new (n, 3) float64 array."""
        ...
