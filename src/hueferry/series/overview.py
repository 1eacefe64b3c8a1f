"""The series as a whole: who is near whom, before and after, and how lightness and chroma run over it."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import PurePosixPath
from typing import Any

import numpy as np

from hueferry.colour.spaces import oklab_to_lab
from hueferry.measure.matrix import compare
from hueferry.palettes.palette import Palette
from hueferry.series.keepsake import Done

MOST_IN_A_MATRIX = 150
"""Pictures beyond which nobody reads a matrix of each with each, and the record leaves it out."""

LEAST = 3
"""Pictures below which there is no series to look over."""


def overview(done: Sequence[Done]) -> dict[str, Any]:
    """Return distances before and after, one map of both, outliers and traces, as JSON values; empty below three.

    Distances are sliced W2 in ΔE*ab (D50), and left out for very many pictures. The map shows every picture before and
    after on the same two axes.
    """
    if len(done) < LEAST:
        return {}
    names = [PurePosixPath(one.entry.source.path).name for one in done]
    before, after = [one.palette for one in done], [one.palette_after for one in done]
    together = compare([*before, *after], [*names, *names])
    first, second = compare(before, names), compare(after, names)
    return {
        "names": names,
        "distances_before": _rounded(first.distances) if len(done) <= MOST_IN_A_MATRIX else [],
        "distances_after": _rounded(second.distances) if len(done) <= MOST_IN_A_MATRIX else [],
        "map_before": _rounded(together.positions[: len(done)]),
        "map_after": _rounded(together.positions[len(done) :]),
        "shown": round(together.shown, 3),
        "order": list(first.order),
        "outliers_before": [names[index] for index in first.outliers],
        "outliers_after": [names[index] for index in second.outliers],
        "traces": {"before": _trace(before), "after": _trace(after)},
    }


def _trace(palettes: Sequence[Palette]) -> dict[str, list[float]]:
    """Mean L* and C*ab of every picture, in the order of the run."""
    lightness, chroma = [], []
    for palette in palettes:
        lab = oklab_to_lab(palette.colours)
        lightness.append(round(float(palette.weights @ lab[:, 0]), 2))
        chroma.append(round(float(palette.weights @ np.hypot(lab[:, 1], lab[:, 2])), 2))
    return {"lightness": lightness, "chroma": chroma}


def _rounded(values: np.ndarray[Any, np.dtype[np.float64]]) -> list[list[float]]:
    return [[round(float(value), 3) for value in row] for row in values]
