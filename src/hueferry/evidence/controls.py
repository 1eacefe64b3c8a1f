"""Controls on the map of `agree`: neutrals, tone or chroma alone, held colours."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.maps.protocol import Map

_LEVELS = np.linspace(0.0, 1.25, 501)

_CELL = 0.02
"""Side of the Oklab cells that held colours are gathered in."""


@attrs.frozen(eq=False)
class NeutralAxis:
    """A map less the colour that it gives to neutrals, as far as `keep` says at each lightness.

    What is taken off depends on the source's lightness alone, so the Jacobian's determinant stays that of `inner`
    wherever `inner` carries lightness by lightness alone.

    Attributes:
        inner: the map.
        keep: (501,) share taken off at lightness 0 … 1.25.
        tint: (501, 2) Oklab a, b that `inner` gives to neutrals there.
    """

    inner: Map
    keep: NDArray[np.float64] = attrs.field(converter=read_only)
    tint: NDArray[np.float64] = attrs.field(converter=read_only)

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) Oklab colours over."""
        carried = np.array(self.inner(colours))
        level = np.clip(np.asarray(colours)[:, 0], 0.0, _LEVELS[-1])
        share = np.interp(level, _LEVELS, self.keep)
        for axis in (0, 1):
            carried[:, axis + 1] -= share * np.interp(level, _LEVELS, self.tint[:, axis])
        return carried


def keep_neutrals_of(inner: Map) -> NeutralAxis:
    """Leave every neutral without colour."""
    return _with_neutrals(inner, np.ones_like(_LEVELS))


def _with_neutrals(inner: Map, keep: NDArray[np.float64]) -> NeutralAxis:
    neutrals = np.stack([_LEVELS, np.zeros_like(_LEVELS), np.zeros_like(_LEVELS)], axis=1)
    return NeutralAxis(inner, keep, inner(neutrals)[:, 1:])


@attrs.frozen(eq=False)
class HeldColours:
    """A map that stands still on held colours and comes back to `inner` away from them.

    Attributes:
        inner: the map.
        centres: (k, 3) held Oklab colours.
        reach: distance in Oklab over which the hold fades.
        slack: share of the movement that held colours keep, 0 … 1.
    """

    inner: Map
    centres: Colours = attrs.field(converter=read_only)
    reach: float = 0.08
    slack: float = 0.0

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) Oklab colours over."""
        colours = np.asarray(colours, dtype=np.float64)
        carried = self.inner(colours)
        free = np.ones(len(colours))
        for start in range(0, len(colours), 2048):
            part = slice(start, start + 2048)
            near = (self.centres**2).sum(axis=1) - 2 * colours[part] @ self.centres.T
            squared = (colours[part] ** 2).sum(axis=1) + near.min(axis=1)
            free[part] = 1 - (1 - self.slack) * np.exp(-np.maximum(squared - _CELL**2 * 3, 0) / (2 * self.reach**2))
        return colours + free[:, None] * (carried - colours)


def hold_colours(inner: Map, colours: Colours, *, limit: float) -> Map:
    """Return `inner` so weakened around (n, 3) Oklab `colours` that none of them moves more than `limit` ΔE00."""
    if not len(colours):
        return inner
    moved = _farthest(inner, colours)
    if moved <= limit:
        return inner
    _, first = np.unique(np.floor(colours / _CELL), axis=0, return_index=True)
    centres = colours[first]
    held: Map = HeldColours(inner, centres, slack=limit / moved)
    return held if _farthest(held, colours) <= limit else HeldColours(inner, centres, slack=0.0)


def _farthest(map_: Map, colours: Colours) -> float:
    """Return the largest ΔE00 that (n, 3) `colours` move by."""
    return float(delta_e_2000(oklab_to_lab(map_(colours)), oklab_to_lab(colours)).max())


@attrs.frozen(eq=False)
class Part:
    """The lightness of a map with the source's a, b, or the other way round."""

    inner: Map
    tone: bool

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) Oklab colours over."""
        carried, kept = np.array(self.inner(colours)), np.asarray(colours)
        columns = slice(1, 3) if self.tone else slice(0, 1)
        carried[:, columns] = kept[:, columns]
        return carried


def only_tone(inner: Map) -> Part:
    """Correct lightness alone."""
    return Part(inner, tone=True)


def only_chroma(inner: Map) -> Part:
    """Correct a, b alone."""
    return Part(inner, tone=False)
