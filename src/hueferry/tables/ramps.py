"""Smooth ramps through a table: where they stop rising or jump, a sky or a cheek would show a band."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.colour.spaces import SRGB_TO_XYZ_D50, xyz_to_lab
from hueferry.colour.transfer import srgb_to_linear
from hueferry.picture import Encoding
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

STEPS = 4096
LARGEST_STEP = 3.0
"""Largest accepted step of a ramp, in median steps."""

_ROUNDING = 1e-5
"""L* below this is rounding."""

_RAMPS: tuple[tuple[str, tuple[float, float, float], tuple[float, float, float]], ...] = (
    ("gray", (0.0, 0.0, 0.0), (1.0, 1.0, 1.0)),
    ("skin", (0.25, 0.16, 0.12), (0.95, 0.80, 0.72)),
    ("sky", (0.20, 0.33, 0.50), (0.85, 0.93, 1.0)),
)
"""Name, dark end and light end, in sRGB codes."""


@attrs.frozen
class Ramp:
    """How a ramp of 4,096 steps, even in sRGB codes, comes out of a table.

    Attributes:
        name: "gray", "skin" or "sky".
        falls: steps at which lightness falls.
        step: largest step of lightness over the median step of those that are not clipped away; at most 1e6.
    """

    name: str
    falls: int
    step: float

    @property
    def rises(self) -> bool:
        """Whether lightness never falls, and no step stands out."""
        return self.falls == 0 and self.step <= LARGEST_STEP


def read_ramps(table: Table, encoding: Encoding, output: Encoding) -> tuple[Ramp, ...]:
    """Send every ramp through a table that reads `encoding` and writes `output`."""
    found = []
    for name, low, high in _RAMPS:
        steps, median = _steps(_codes(low, high, encoding), table, output)
        falls = int((steps < -_ROUNDING).sum())
        found.append(Ramp(name, falls, min(float(steps.max()) / median, 1e6)))
    return tuple(found)


def uneven_codes(table: Table, encoding: Encoding, output: Encoding) -> Codes:
    """Return the (m, 3) codes at which a ramp falls or jumps; empty where all rise evenly."""
    found = [np.empty((0, 3))]
    for _, low, high in _RAMPS:
        codes = _codes(low, high, encoding)
        steps, median = _steps(codes, table, output)
        found.append(codes[1:][(steps < -_ROUNDING) | (steps > LARGEST_STEP * median)])
    return np.concatenate(found)


def _codes(low: tuple[float, ...], high: tuple[float, ...], encoding: Encoding) -> Codes:
    position = np.linspace(0.0, 1.0, STEPS)[:, None]
    srgb = np.array(low) * (1 - position) + np.array(high) * position
    return np.clip(encoding.from_xyz(srgb_to_linear(srgb) @ SRGB_TO_XYZ_D50.T), 0.0, 1.0)


def _steps(codes: Codes, table: Table, output: Encoding) -> tuple[NDArray[np.float64], float]:
    lightness = xyz_to_lab(output.to_xyz(np.clip(look_up(table, codes), 0.0, 1.0)))[:, 0]
    steps = np.diff(lightness)
    # Steps that are clipped away say nothing of the others; where all are, nothing but rounding is left.
    rising = steps[np.abs(steps) > _ROUNDING]
    return steps, max(float(np.median(rising)), _ROUNDING) if rising.size else _ROUNDING
