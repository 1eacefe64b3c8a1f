"""Smooth ramps through a table: where they stop rising or jump, a sky or a cheek would show a band."""

from __future__ import annotations

from functools import lru_cache

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.colour.spaces import SRGB_TO_XYZ_D50, xyz_to_lab
from hueferry.colour.transfer import srgb_to_linear
from hueferry.picture import Encoding, EncodingKey
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

Steps = NDArray[np.float64]

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
    followed = _followed(table, EncodingKey(encoding), EncodingKey(output))
    return tuple(
        Ramp(name, int((steps < -_ROUNDING).sum()), min(float(steps.max()) / median, 1e6))
        for (name, _, _), steps, median in zip(_RAMPS, *followed, strict=True)
    )


def uneven_codes(table: Table, encoding: Encoding, output: Encoding) -> Codes:
    """Return the (m, 3) codes at which a ramp falls or jumps; empty where all rise evenly."""
    followed = _followed(table, EncodingKey(encoding), EncodingKey(output))
    found = [
        codes[1:][(steps < -_ROUNDING) | (steps > LARGEST_STEP * median)]
        for codes, steps, median in zip(_ramps_in(EncodingKey(encoding)), *followed, strict=True)
    ]
    return np.concatenate(found)


@lru_cache(maxsize=8)
def _ramps_in(key: EncodingKey) -> tuple[Codes, ...]:
    """Return (`STEPS`, 3) codes of every ramp."""
    position = np.linspace(0.0, 1.0, STEPS)[:, None]
    ramps = (np.array(low) * (1 - position) + np.array(high) * position for _, low, high in _RAMPS)
    return tuple(np.clip(key.encoding.from_xyz(srgb_to_linear(srgb) @ SRGB_TO_XYZ_D50.T), 0.0, 1.0) for srgb in ramps)


@lru_cache(maxsize=2)
def _followed(table: Table, encoding: EncodingKey, output: EncodingKey) -> tuple[list[Steps], list[float]]:
    """Return the (`STEPS` − 1,) steps of lightness of every ramp, and their medians; found once for a table."""
    through = look_up(table, np.concatenate(_ramps_in(encoding)))
    lightness = xyz_to_lab(output.encoding.to_xyz(np.clip(through, 0.0, 1.0)))[:, 0]
    steps = [np.diff(one) for one in lightness.reshape(len(_RAMPS), STEPS)]
    # Steps that are clipped away say nothing of the others; where all are, nothing but rounding is left.
    rising = [one[np.abs(one) > _ROUNDING] for one in steps]
    return steps, [max(float(np.median(one)), _ROUNDING) if one.size else _ROUNDING for one in rising]
