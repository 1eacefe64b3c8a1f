"""Colours of the picture that would leave the code range, rolled off towards its ends instead of clipped.

One increasing curve for all channels: neutrals stay neutral, no cell can fold by it or stretch more, and colours that
no picture has are not pressed against the gamut's edge, where the cells of a table turn flat.
"""

from __future__ import annotations

from collections.abc import Callable

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.tables.cells import Occupied

_LEFT_OUT = 0.0005
"""Share of the picture that may be clipped rather than bend everything else."""

_NEGLIGIBLE = 0.25 / 255
"""Codes beyond the range that rounding hides."""

_REACH = 2.0
"""The curve begins this many times as far inside as the colours lie outside."""

_WIDEST_ABOVE, _WIDEST_BELOW = 0.06, 0.02
"""Codes that a curve bends at most. Wider would keep more steps apart, and move colours that are not concerned."""


@attrs.frozen
class RollOff:
    """An increasing curve, the identity up to a knee, that brings one code beyond the end of the range onto the end.

    Attributes:
        most: the code that comes out as 1; > 1.
        widest: codes below 1 that are bent at most.
    """

    most: float
    widest: float

    @property
    def knee(self) -> float:
        """Code up to which nothing changes."""
        return 1.0 - min(_REACH * (self.most - 1.0), self.widest)

    def __call__(self, codes: Codes) -> Codes:
        """Roll codes off: k + d / (1 + a d) with d = code − k, so that the slope is 1 at the knee k and never 0."""
        room, span = 1.0 - self.knee, self.most - self.knee
        bend = (span / room - 1.0) / span
        beyond = np.maximum(codes - self.knee, 0.0)
        return np.asarray(np.minimum(codes, self.knee) + beyond / (1.0 + bend * beyond))


def roll_into_range(function: Callable[[Codes], Codes], occupied: Occupied) -> Callable[[Codes], Codes]:
    """Return `function` with its results rolled off at the ends that the occupied colours would leave.

    Args:
        function: (n, 3) codes to (n, 3) codes, not clipped.
        occupied: the colours of the pictures.
    """
    result = function(occupied.codes)
    above = _reached(result.max(axis=1), occupied.weights)
    below = -_reached(-result.min(axis=1), occupied.weights)
    upper = RollOff(above, _WIDEST_ABOVE) if above > 1.0 + _NEGLIGIBLE else None
    lower = RollOff(1.0 - below, _WIDEST_BELOW) if below < -_NEGLIGIBLE else None
    if upper is None and lower is None:
        return function

    def rolled(codes: Codes) -> Codes:
        values = function(codes)
        values = values if upper is None else upper(values)
        return values if lower is None else 1.0 - lower(1.0 - values)

    return rolled


def _reached(values: NDArray[np.float64], weights: NDArray[np.float64]) -> float:
    """Return the value that all but a negligible share of the picture stays within."""
    order = np.argsort(values)
    place = np.searchsorted(np.cumsum(weights[order]), 1.0 - _LEFT_OUT)
    return float(values[order[min(int(place), len(values) - 1)]])
