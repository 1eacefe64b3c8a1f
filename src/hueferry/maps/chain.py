"""Monotone chains: one-dimensional maps along the axes of a basis, one basis after another."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights, read_only

Line = NDArray[np.float64]


@attrs.frozen(eq=False)
class Rising:
    """A rising piecewise linear function; beyond its knots it keeps the slope of 1.

    Attributes:
        knots: (k,) strictly increasing.
        values: (k,) not decreasing.
    """

    knots: Line = attrs.field(converter=read_only)
    values: Line = attrs.field(converter=read_only)

    def __call__(self, positions: Line) -> Line:
        """Carry (n,) positions over."""
        inside = np.interp(positions, self.knots, self.values)
        beyond = positions - np.clip(positions, self.knots[0], self.knots[-1])
        return np.asarray(inside + beyond)


@attrs.frozen(eq=False)
class Link:
    """Three rising functions along the axes of an orthonormal basis.

    Attributes:
        basis: (3, 3), a row an axis.
        along: one function an axis.
    """

    basis: NDArray[np.float64] = attrs.field(converter=read_only)
    along: tuple[Rising, Rising, Rising]

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        turned = colours @ self.basis.T
        moved = np.stack([rising(turned[:, axis]) for axis, rising in enumerate(self.along)], axis=1)
        return np.asarray(moved @ self.basis)


@attrs.frozen(eq=False)
class Chain:
    """Links one after another; each is the gradient of a convex function, so no link folds."""

    links: Sequence[Link]

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        carried = np.array(colours, dtype=np.float64)
        for link in self.links:
            carried = link(carried)
        return carried


def rising_between(
    source: Line, source_weights: Weights, target: Line, target_weights: Weights, *, knots: int, steepest: float
) -> Rising:
    """Return the rising function that carries one weighted line to another, through `knots` quantiles.

    Between 1/steepest and `steepest` slopes are taken as they are; beyond, the excess is spread over the neighbours.

    Args:
        source: (n,) positions.
        source_weights: (n,) shares that sum to 1.
        target: (m,) positions.
        target_weights: (m,) shares that sum to 1.
        knots: quantiles that are matched; fewer are smoother.
        steepest: largest slope, > 1.
    """
    levels = (np.arange(knots) + 0.5) / knots
    x = _quantiles(source, source_weights, levels)
    y = _quantiles(target, target_weights, levels)
    width = max(float(x[-1] - x[0]), 1e-9) / (8 * knots)
    distinct = np.concatenate([[True], np.diff(x) > width])
    group = np.cumsum(distinct) - 1
    count = np.bincount(group)
    x, y = np.bincount(group, x) / count, np.bincount(group, y) / count
    steps, rises = np.diff(x), np.diff(y)
    limited = np.clip(rises, steps / steepest, steps * steepest)
    centred = np.concatenate([[0.0], np.cumsum(limited)])
    shift = float(count @ (y - centred)) / count.sum()
    return Rising(x, centred + shift)


def _quantiles(positions: Line, weights: Weights, levels: Line) -> Line:
    order = np.argsort(positions, kind="stable")
    middle = np.cumsum(weights[order]) - weights[order] / 2
    return np.interp(levels, middle, positions[order])
