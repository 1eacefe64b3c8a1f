"""What process nodes with numbers in arrays do to colours: matrix, range, one- and three-dimensional tables.

Codes are normalised: 1 is the top of an integer code range, whatever the bit depth of the file.

References:
    Academy S-2014-006, Common LUT Format, version 3.0; SMPTE ST 2136-1.
"""

from __future__ import annotations

from typing import Protocol

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, read_only
from hueferry.tables.lookup import tetrahedral

Floats = NDArray[np.float64]
_LARGEST_HALF = 65504.0
HALVES = 1 << 16
"""How many bit patterns a 16-bit float has: the length of a table over half-floats."""


class Operation(Protocol):
    """One process node: pure, finite for finite colours."""

    @property
    def separable(self) -> bool:
        """Whether each channel of the result depends on its own channel alone."""
        ...

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        ...


@attrs.frozen(eq=False)
class Matrix:
    """A linear map of the three channels, and an offset.

    Attributes:
        linear: (3, 3), a row an output channel.
        offset: (3,).
    """

    linear: Floats = attrs.field(converter=read_only)
    offset: Floats = attrs.field(converter=read_only)

    @property
    def separable(self) -> bool:
        """Whether it is diagonal."""
        return not np.any(self.linear - np.diag(np.diag(self.linear)))

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        return np.asarray(codes @ self.linear.T + self.offset)


@attrs.frozen
class Range:
    """A scale and an offset, then a clamp at either end.

    Attributes:
        scale: what codes are multiplied by.
        offset: what is added.
        lowest: lower clamp; minus infinity for none.
        highest: upper clamp; infinity for none.
    """

    scale: float = 1.0
    offset: float = 0.0
    lowest: float = -np.inf
    highest: float = np.inf
    separable: bool = True

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        return np.clip(codes * self.scale + self.offset, self.lowest, self.highest)


@attrs.frozen(eq=False)
class Curves:
    """A table a channel over even steps of 0 … 1, read by linear interpolation; codes beyond are clamped.

    Attributes:
        values: (n, 3) what the steps become.
    """

    values: Floats = attrs.field(converter=read_only)
    separable: bool = True

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        steps = np.linspace(0.0, 1.0, len(self.values))
        return np.stack([np.interp(codes[:, i], steps, self.values[:, i]) for i in range(3)], axis=1)


@attrs.frozen(eq=False)
class HalfCurves:
    """A table a channel over all 16-bit floats, read by linear interpolation between neighbouring ones.

    Attributes:
        values: (65536, 3) what the float with that bit pattern becomes.
    """

    values: Floats = attrs.field(converter=read_only)
    separable: bool = True

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        held = np.clip(codes, -_LARGEST_HALF, _LARGEST_HALF)
        nearest = held.astype(np.float16)
        value = nearest.astype(np.float64)
        above = value > held
        towards = np.where(above, -np.inf, np.inf).astype(np.float16)
        other = np.clip(np.nextafter(nearest, towards), np.float16(-_LARGEST_HALF), np.float16(_LARGEST_HALF))
        span = other.astype(np.float64) - value
        share = np.divide(held - value, span, out=np.zeros_like(held), where=span != 0)
        at, beside = (
            np.take_along_axis(self.values, half.view(np.uint16).astype(np.int64), 0) for half in (nearest, other)
        )
        return np.asarray(at + share * (beside - at))


@attrs.frozen(eq=False)
class Cube:
    """A three-dimensional table over 0 … 1; codes beyond are clamped.

    Attributes:
        lattice: (n, n, n, 3), indexed [red, green, blue].
        is_tetrahedral: how it is read: in tetrahedra, else trilinearly.
    """

    lattice: Floats = attrs.field(converter=read_only)
    is_tetrahedral: bool
    separable: bool = False

    @property
    def size(self) -> int:
        """Nodes along each axis."""
        return int(self.lattice.shape[0])

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        positions = np.clip(codes, 0.0, 1.0) * (self.size - 1)
        flat = self.lattice.reshape(-1, 3)
        return tetrahedral(flat, self.size, positions) if self.is_tetrahedral else trilinear(flat, self.size, positions)


def trilinear(lattice: Codes, size: int, positions: Codes) -> Codes:
    """Read a lattice by trilinear interpolation.

    Args:
        lattice: (size³, 3) values, the third channel changing fastest.
        size: nodes along each axis.
        positions: (n, 3), in steps between nodes, 0 … size − 1.
    """
    cell = np.minimum(positions.astype(np.int64), size - 2)
    share = positions - cell
    node = cell @ np.array([size * size, size, 1])
    planes = []
    for red in (0, size * size):
        rows = []
        for green in (0, size):
            start = lattice[node + red + green]
            rows.append(start + share[:, 2:] * (lattice[node + red + green + 1] - start))
        planes.append(rows[0] + share[:, 1:2] * (rows[1] - rows[0]))
    return np.asarray(planes[0] + share[:, :1] * (planes[1] - planes[0]))
