"""A palette as a handful of groups, for people."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.palettes.palette import Palette

_ROUNDS = 12


def group(palette: Palette, count: int = 10) -> tuple[Palette, NDArray[np.intp]]:
    """Gather the colours of a palette into at most `count` groups, largest first; the same palette, the same groups.

    Returns:
        The groups as a palette (means and summed weights), and for each colour of `palette` the number of its group.

    References:
        Lloyd (1982), Least squares quantization in PCM; seeds by the deterministic farthest weighted point.
    """
    colours, weights = palette.colours, palette.weights
    centres = _seeds(palette, min(count, len(palette)))
    for _ in range(_ROUNDS):
        label = _nearest(colours, centres)
        mass = np.bincount(label, weights, len(centres))
        sums = np.stack([np.bincount(label, weights * colours[:, axis], len(centres)) for axis in range(3)], axis=1)
        centres = np.where(mass[:, None] > 0, sums / np.maximum(mass, 1e-300)[:, None], centres)
    label = _nearest(colours, centres)
    mass = np.bincount(label, weights, len(centres))
    order = np.argsort(-mass, kind="stable")
    order = order[mass[order] > 0]
    number = np.zeros(len(centres), dtype=np.intp)
    number[order] = np.arange(len(order))
    kept = mass[order] / mass[order].sum()
    return Palette(centres[order], kept, pixels=palette.pixels), number[label]


def _seeds(palette: Palette, count: int) -> NDArray[np.float64]:
    chosen = [int(np.argmax(palette.weights))]
    distance = ((palette.colours - palette.colours[chosen[0]]) ** 2).sum(axis=1)
    for _ in range(count - 1):
        chosen.append(int(np.argmax(distance * palette.weights)))
        distance = np.minimum(distance, ((palette.colours - palette.colours[chosen[-1]]) ** 2).sum(axis=1))
    return palette.colours[chosen].copy()


def _nearest(colours: NDArray[np.float64], centres: NDArray[np.float64]) -> NDArray[np.intp]:
    return np.asarray(((colours[:, None, :] - centres[None, :, :]) ** 2).sum(axis=2).argmin(axis=1))
