"""How the code cube is cut into cells."""

from __future__ import annotations

import enum
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.picture import Encoding


class Spacing(enum.Enum):
    """How the cells of a channel are spread over its codes."""

    EVEN = "even"
    """Cells of equal width: for codes that follow lightness, as those of nearly every picture do."""
    LINEAR_LIGHT = "linear light"
    """Cell bounds grow as a cube, as light does with lightness: for codes that are light itself."""


_POWER = MappingProxyType({Spacing.EVEN: 1, Spacing.LINEAR_LIGHT: 3})


@attrs.frozen
class Cells:
    """The cells of one channel: code 0, the codes between, and the top code.

    Code 0 and the top code have a cell of their own, so that pixels clipped in every channel are told from others
    by counting alone.

    Attributes:
        bits: significant bits a channel.
        spacing: how the cells are spread.
        inner: cells between code 0 and the top code, where there are codes enough; 127 are two codes wide at 8 bits.
    """

    bits: int = attrs.field(validator=attrs.validators.in_(range(1, 17)))
    spacing: Spacing = Spacing.EVEN
    inner: int = attrs.field(default=127, validator=attrs.validators.in_(range(1, 255)))

    @property
    def levels(self) -> int:
        """How many codes a channel has."""
        return 1 << self.bits

    @property
    def starts(self) -> NDArray[np.int64]:
        """(n,) first code of each cell, ascending; n <= 256."""
        top, power = self.levels - 1, _POWER[self.spacing]
        bounds = [1 - (-(step**power) * (top - 1) // self.inner**power) for step in range(self.inner + 1)]
        return np.unique(np.array([0, *bounds, top], dtype=np.int64))

    @property
    def side(self) -> int:
        """How many cells a channel has."""
        return len(self.starts)

    def of_code(self) -> NDArray[np.uint8]:
        """Return the (levels,) number of the cell that holds each code."""
        return (np.searchsorted(self.starts, np.arange(self.levels), side="right") - 1).astype(np.uint8)

    def axes(self, cells: NDArray[np.int64]) -> tuple[NDArray[np.int64], ...]:
        """Return red, green and blue cell numbers of joint cells."""
        rows = cells // self.side  # quicker than divmod
        red = rows // self.side
        return red, rows - red * self.side, cells - rows * self.side


def spacing_of(encoding: Encoding) -> Spacing:
    """Tell whether an encoding's codes are light itself: a quarter of the code range then gives a quarter of Y."""
    luminance = float(encoding.to_xyz(np.full((1, 3), 0.25))[0, 1])
    return Spacing.LINEAR_LIGHT if luminance > 0.15 else Spacing.EVEN
