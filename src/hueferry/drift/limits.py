"""Control limits: constants of ranges, individuals and moving-range charts, and the exponentially weighted average.

Limits rest on moving ranges, the differences of one reading to the next, and not on the overall deviation: a slow
drift hardly widens the former, but inflates the latter and so hides itself.
"""

from __future__ import annotations

import math
from functools import lru_cache

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError

Series = NDArray[np.float64]

_GRID = np.linspace(-8.5, 8.5, 341)


@attrs.frozen
class RangeConstants:
    """What the range and the deviation of n normal readings are on average, for a standard deviation of 1.

    Attributes:
        size: n >= 2.
        d2: mean range.
        d3: standard deviation of the range.
        c4: mean standard deviation.
    """

    size: int
    d2: float
    d3: float
    c4: float

    @property
    def mean_by_range(self) -> float:
        """A2: half width of an X̄ chart in mean ranges."""
        return 3 / (self.d2 * math.sqrt(self.size))

    @property
    def individual_by_range(self) -> float:
        """E2 = 3 / d2: half width of an individuals chart in mean ranges."""
        return 3 / self.d2

    @property
    def range_limits(self) -> tuple[float, float]:
        """D3, D4: limits of a range chart in mean ranges."""
        return max(0.0, 1 - 3 * self.d3 / self.d2), 1 + 3 * self.d3 / self.d2

    @property
    def mean_by_deviation(self) -> float:
        """A3: half width of an X̄ chart in mean standard deviations."""
        return 3 / (self.c4 * math.sqrt(self.size))

    @property
    def deviation_limits(self) -> tuple[float, float]:
        """B3, B4: limits of a deviation chart in mean standard deviations."""
        half = 3 * math.sqrt(1 - self.c4**2) / self.c4
        return max(0.0, 1 - half), 1 + half


@lru_cache(maxsize=32)
def range_constants(size: int) -> RangeConstants:
    """Return the constants for n readings, from the integrals of order statistics.

    Raises:
        InputError: fewer than two readings have no range.

    References:
        Tippett (1925), On the extreme individuals and the range of samples; ASTM Manual 7 for tables.
    """
    if size < 2:
        raise InputError(f"the range of {size} readings says nothing; give at least 2")
    below = _normal_below(_GRID)
    step = float(_GRID[1] - _GRID[0])
    d2 = float((1 - below**size - (1 - below) ** size).sum() * step)
    ranges = np.arange(0.0, 14.0, step)
    low, high = _GRID[:, None], _GRID[:, None] + ranges[None, :]
    held = np.maximum(_normal_below(high) - below[:, None], 0.0) ** (size - 2)
    density = size * (size - 1) * (np.exp(-(low**2 + high**2) / 2) / (2 * math.pi) * held).sum(axis=0) * step
    squared = float((ranges**2 * density).sum() * step)
    c4 = math.sqrt(2 / (size - 1)) * math.exp(math.lgamma(size / 2) - math.lgamma((size - 1) / 2))
    return RangeConstants(size, d2, math.sqrt(squared - d2**2), c4)


def _normal_below(x: Series) -> Series:
    from scipy.special import ndtr

    return np.asarray(ndtr(x))


@attrs.frozen
class Level:
    """Where a series is in control, and how its readings scatter there.

    Attributes:
        centre: mean of the readings it was estimated from.
        deviation: standard deviation of one reading, from moving ranges.
        readings: how many readings it rests on; None if both are known rather than estimated.
    """

    centre: float
    deviation: float
    readings: int | None = None

    def width(self, share: float = 1.0, *, sigmas: float = 3.0) -> float:
        """Return the half width of limits for an average whose variance is `share` of one reading's.

        Estimated limits are wider than known ones, so that they alarm as rarely: the centre has an error of its own,
        and the deviation, resting on m − 1 moving ranges, has about 0.62 (m − 1) degrees of freedom.

        References:
            Roes, Does & Schurink (1993), Shewhart-type control charts for individual observations, for limits of
            estimated parameters; Palm & Wheeler (1990) for the degrees of freedom of moving ranges.
        """
        if self.readings is None:
            return sigmas * self.deviation * math.sqrt(share)
        from scipy.special import ndtr, stdtrit

        freedom = max(0.62 * (self.readings - 1), 1.0)
        factor = float(stdtrit(freedom, float(ndtr(sigmas))))
        return factor * self.deviation * math.sqrt(share + 1 / self.readings)


def moving_ranges(values: Series) -> Series:
    """Return the (n − 1,) absolute differences of one reading to the next."""
    return np.abs(np.diff(values))


def estimate_level(values: Series) -> Level:
    """Estimate centre and deviation from (n,) readings in control: the mean, and the mean moving range over d2.

    Raises:
        InputError: fewer than two readings.

    References:
        NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2.
    """
    if len(values) < 2:
        raise InputError(f"limits need two readings or more, not {len(values)}")
    deviation = float(moving_ranges(values).mean()) / range_constants(2).d2
    return Level(float(np.mean(values)), deviation, len(values))


def range_limit(values: Series) -> float:
    """Return the upper limit of the moving ranges: D4 times their mean (NIST/SEMATECH e-Handbook 6.3.2.2)."""
    return range_constants(2).range_limits[1] * float(moving_ranges(values).mean())


def weighted_average(values: Series, start: float, *, memory: float) -> Series:
    """Return the (n,) exponentially weighted moving average: z = memory · y + (1 − memory) · z before.

    References:
        Roberts (1959), Control chart tests based on geometric moving averages; NIST/SEMATECH e-Handbook 6.3.2.4.
    """
    averages = np.empty(len(values))
    last = start
    for index, value in enumerate(values):
        last = memory * float(value) + (1 - memory) * last
        averages[index] = last
    return averages


def average_share(times: Series, *, memory: float) -> Series:
    """Return the variance of the weighted average after 1, 2, … readings, as a share of one reading's.

    It grows to memory / (2 − memory); the exact start-up is Montgomery's, Introduction to Statistical Quality Control.
    """
    return np.asarray(memory / (2 - memory) * (1 - (1 - memory) ** (2 * np.asarray(times, dtype=np.float64))))
