"""A palette as a handful of groups, for people."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import group as label


def group(palette: Palette, count: int = 10) -> tuple[Palette, NDArray[np.intp]]:
    """Gather the colours of a palette into at most `count` groups, largest first; the same palette, the same groups.

    Returns:
        The groups as a palette (means and summed weights), and for each colour of `palette` the number of its group.
    """
    labels = np.asarray(label(palette.colours, palette.weights, count), dtype=np.intp)
    mass = np.bincount(labels, palette.weights)
    sums = np.stack([np.bincount(labels, palette.weights * palette.colours[:, k]) for k in range(3)], axis=1)
    order = np.argsort(-mass, kind="stable")
    order = order[mass[order] > 0]
    number = np.zeros(len(mass), dtype=np.intp)
    number[order] = np.arange(len(order))
    kept = mass[order]
    return Palette(sums[order] / kept[:, None], kept / kept.sum(), pixels=palette.pixels), number[labels]
