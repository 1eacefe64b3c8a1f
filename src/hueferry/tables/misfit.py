"""How far a table is from the function it stands for."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.arrays import Codes
from hueferry.tables.build import CodeFunction
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table


@attrs.frozen
class Misfit:
    """Differences of the worst channel over colours of all 0 … 1, in 8-bit codes; beyond 1, relative to the value.

    Attributes:
        mean: their mean.
        high: their 99.9th percentile.
        largest: the largest of them.
    """

    mean: float
    high: float
    largest: float

    @property
    def sentence(self) -> str:
        """Say it in plain words."""
        if self.largest < 5e-4:
            return "the table is exact within 32-bit rounding"
        return (
            f"the table is {self.mean:.3g} codes of 255 off on average, {self.high:.3g} at the 99.9th percentile, "
            f"{self.largest:.3g} at most"
        )


def misfit(table: Table, function: CodeFunction, colours: Codes) -> Misfit:
    """Compare a table with a function on (n, 3) colours of 0 … 1."""
    wanted = function(colours)
    error = 255 * np.abs(look_up(table, colours) - wanted) / np.maximum(1.0, np.abs(wanted))
    worst = error.max(axis=1)
    return Misfit(float(worst.mean()), float(np.quantile(worst, 0.999)), float(worst.max()))


def probes(count: int = 40_000) -> Codes:
    """Return colours that show where tables fail: everywhere, in the dark, on the sides of the cube, and grays."""
    rng = np.random.default_rng(20_140_006)
    even = rng.uniform(0.0, 1.0, (count, 3))
    dark = rng.uniform(0.0, 1.0, (count // 4, 3)) ** 3
    sides = rng.uniform(0.0, 1.0, (count // 4, 3))
    sides[np.arange(len(sides)), rng.integers(0, 3, len(sides))] = rng.integers(0, 2, len(sides))
    return np.concatenate([even, dark, sides, grays(count // 4)])


def grays(count: int) -> Codes:
    """Return (count, 3) grays, denser in the dark, both ends among them."""
    rng = np.random.default_rng(61_966)
    ramp = np.concatenate([[0.0, 1.0], rng.uniform(0, 1, count // 2), rng.uniform(0, 1, count - count // 2 - 2) ** 3])
    return np.repeat(ramp[:, None], 3, axis=1)
