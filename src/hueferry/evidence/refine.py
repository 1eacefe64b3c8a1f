"""What pairs say beyond the camera-like family: a smooth correction that ends where the pairs end."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.maps.protocol import Map

WIDTHS = (0.24, 0.12)
"""Reaches of a correction that are tried, in Oklab: wide enough for a table to follow."""

CENTRES = 160
"""Colours that carry a correction, at most."""

_USUAL = 0.03
"""Oklab; deviation of a rendering from the camera-like family."""

_NOISE = 0.006
"""Oklab; least deviation of a pair."""

_INDEPENDENT = 8.0
"""Neighbouring pairs that count as one."""

_STEP = 0.004
_LEAST_VOLUME = 0.2
"""Share of the inner map's volume that a refined map must keep at every colour looked at: far from any fold."""


@attrs.frozen(eq=False)
class Correction:
    """A sum of Gaussian bumps in Oklab, 0 away from its centres.

    Attributes:
        centres: (m, 3) Oklab.
        lift: (m, 3) what each bump adds.
        width: deviation of the bumps.
    """

    centres: Colours = attrs.field(converter=read_only)
    lift: Colours = attrs.field(converter=read_only)
    width: float

    def __call__(self, colours: Colours) -> Colours:
        """Return what is added at (n, 3) colours."""
        added = np.empty((len(colours), 3))
        for start in range(0, len(colours), 8192):
            part = slice(start, start + 8192)
            added[part] = _bumps(colours[part], self.centres, self.width) @ self.lift
        return added


@attrs.frozen(eq=False)
class RefinedMap:
    """A map with corrections added, each by its share."""

    inner: Map
    corrections: tuple[Correction, ...]
    shares: tuple[float, ...]

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) Oklab colours over."""
        colours = np.asarray(colours, dtype=np.float64)
        carried = np.array(self.inner(colours))
        for correction, share in zip(self.corrections, self.shares, strict=True):
            carried += share * correction(colours)
        return carried


def fit_correction(source: Colours, residual: Colours, *, weights: NDArray[np.float64], width: float) -> Correction:
    """Find the smooth correction that (n, 3) `residual` at (n, 3) `source` supports.

    A Gaussian process on few centres, centred on no correction, with a Student likelihood: where there are no pairs
    it adds nothing.

    References:
        Rasmussen & Williams (2006), Gaussian Processes for Machine Learning, section 8.3.1 (subset of regressors).
    """
    centres = _far_apart(source, least=width / 2)
    bumps = _bumps(source, centres, width)
    prior = _bumps(centres, centres, width) / _USUAL**2 + 1e-6 * np.eye(len(centres)) / _USUAL**2
    lift = np.zeros((len(centres), 3))
    trust = weights / weights.mean() / _INDEPENDENT
    for blur in (0.04, 0.02, 0.01, _NOISE):
        squared = ((residual - bumps @ lift) ** 2).sum(axis=1)
        scale = max(float(np.sqrt(np.median(squared) / 2.366)), blur)
        say = trust * 7 / (4 + squared / scale**2) / scale**2
        lift = np.linalg.solve((bumps * say[:, None]).T @ bumps + prior, (bumps * say[:, None]).T @ residual)
    return Correction(centres, lift, width)


def refine(inner: Map, corrections: Sequence[Correction], shares: Sequence[float], colours: Colours) -> Map:
    """Add corrections to `inner`, weakened until no volume at (n, 3) `colours` and around them comes near a fold."""
    strength = 1.0
    spots = np.concatenate([colours, *(correction.centres for correction in corrections)])
    before = _volumes(inner, spots)
    while strength > 0.1:
        refined = RefinedMap(inner, tuple(corrections), tuple(strength * share for share in shares))
        if (_volumes(refined, spots) > _LEAST_VOLUME * before).all():
            return refined
        strength *= 0.7
    return inner


def _volumes(map_: Map, colours: Colours) -> NDArray[np.float64]:
    """Return the (n,) Jacobian determinants, by central differences."""
    shifts = [_STEP * sign * np.eye(3)[axis] for axis in range(3) for sign in (1, -1)]
    moved = map_(np.concatenate([colours + shift for shift in shifts])).reshape(3, 2, -1, 3)
    jacobian = (moved[:, 0] - moved[:, 1]) / (2 * _STEP)
    return np.asarray(np.linalg.det(np.moveaxis(jacobian, 0, 2)))


def _bumps(colours: Colours, centres: Colours, width: float) -> NDArray[np.float64]:
    squared = (colours**2).sum(axis=1)[:, None] + (centres**2).sum(axis=1) - 2 * colours @ centres.T
    return np.asarray(np.exp(squared / (-2 * width * width)))


def _far_apart(colours: Colours, *, least: float) -> Colours:
    """Pick colours one by one, each the farthest from those before (Gonzalez 1985), until none is `least` away."""
    chosen = [int(np.argmin(((colours - colours.mean(axis=0)) ** 2).sum(axis=1)))]
    distance = ((colours - colours[chosen[0]]) ** 2).sum(axis=1)
    while len(chosen) < CENTRES:
        farthest = int(np.argmax(distance))
        if distance[farthest] < least * least:
            break
        chosen.append(farthest)
        distance = np.minimum(distance, ((colours - colours[farthest]) ** 2).sum(axis=1))
    return colours[chosen]
