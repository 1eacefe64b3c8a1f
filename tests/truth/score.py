"""The score of a case: mean ΔE00 between what came out and what was wanted."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_lab, oklab_to_linear_srgb
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear
from hueferry.maps.protocol import Map

HARM = 0.2
"""ΔE00 beyond which a correction that lost against none is called harmful: below it nobody sees it."""


@attrs.frozen
class Score:
    """How one method did in one case, in ΔE00."""

    method: str
    group: str
    name: str
    seed: int
    score: float
    none: float
    note: str = ""

    @property
    def harm(self) -> float:
        """How much worse than leaving the picture alone; negative is better."""
        return self.score - self.none


def to_lab(pixels: NDArray[np.uint8]) -> NDArray[np.float64]:
    """Turn (…, 3) sRGB pixels into CIELAB D50."""
    return oklab_to_lab(linear_srgb_to_oklab(srgb_to_linear(pixels / 255.0)))


def carry(map_: Map, pixels: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Apply a map to (n, 3) sRGB pixels, clip and round."""
    carried = map_(linear_srgb_to_oklab(srgb_to_linear(pixels / 255.0)))
    codes = linear_to_srgb(oklab_to_linear_srgb(carried))
    return np.asarray(np.rint(np.clip(codes, 0, 1) * 255), dtype=np.uint8)


def mean_error(map_: Map | None, source: NDArray[np.uint8], wanted: NDArray[np.uint8], *, most: int = 20_000) -> float:
    """Return mean ΔE00 to `wanted` after `map_` (None: no map), over an even sample of at most `most` pixels."""
    flat, goal = source.reshape(-1, 3), wanted.reshape(-1, 3)
    step = max(1, len(flat) // most) if most else 1
    picked = np.random.default_rng(0).permutation(len(flat))[: len(flat) // step]
    got = flat[picked] if map_ is None else carry(map_, flat[picked])
    return float(delta_e_2000(to_lab(got), to_lab(goal[picked])).mean())


@attrs.frozen
class Summary:
    """One method in one group."""

    cases: int
    mean: float
    none: float
    ratio: float
    harmed: float
    worst: float


def summarise(scores: Iterable[Score]) -> Mapping[tuple[str, str], Summary]:
    """Sum up by (method, group): mean, mean of none, their ratio, share harmed, worst harm."""
    table: dict[tuple[str, str], list[Score]] = {}
    for score in scores:
        table.setdefault((score.method, score.group), []).append(score)
    return {key: _summary(rows) for key, rows in table.items()}


def _summary(rows: list[Score]) -> Summary:
    mean, none = float(np.mean([row.score for row in rows])), float(np.mean([row.none for row in rows]))
    harms = np.array([row.harm for row in rows])
    return Summary(len(rows), mean, none, mean / none, float((harms > HARM).mean()), float(harms.max()))
