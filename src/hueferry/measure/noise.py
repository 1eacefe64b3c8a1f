"""The noise floor: how much of a difference chance, or the variety inside one picture, would explain."""

from __future__ import annotations

from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Mask
from hueferry.colour.spaces import oklab_to_lab
from hueferry.measure.lines import SortedLines
from hueferry.palettes.blocks import Blocks, count_blocks
from hueferry.palettes.histogram import Counts
from hueferry.picture import PictureSource
from hueferry.transport.sliced import spiral_directions

_LINES = 24
_LEVELS = 64
_QUANTILE = 0.95


@attrs.frozen
class NoiseFloor:
    """What two palettes of one picture differ by; sliced W2 in ΔE*ab (D50), each the 95th percentile over resamples.

    Attributes:
        sampling: between two random halves of its pixels: chance alone.
        split_half: between two random halves of its blocks: what one part of the picture says of the other.
        within: between two pictures put together from blocks drawn at random with replacement (block bootstrap).
        blocks: how many blocks were drawn from.
        resamples: how many times.
    """

    sampling: float
    split_half: float
    within: float
    blocks: int
    resamples: int


@attrs.frozen
class Judgement:
    """Whether a difference is more than noise.

    Attributes:
        difference: sliced W2 between the two pictures, ΔE*ab (D50).
        sampling: what chance explains: the larger of both pictures' floors.
        within: what variety inside one picture explains: the larger of both pictures' floors.
        sentence: the answer for people.
    """

    difference: float
    sampling: float
    within: float
    sentence: str

    @property
    def more_than_sampling(self) -> bool:
        """Whether chance alone cannot explain the difference."""
        return self.difference > self.sampling

    @property
    def more_than_within(self) -> bool:
        """Whether the variety inside one picture cannot explain it either."""
        return self.difference > max(self.sampling, self.within)


def noise_floor(source: PictureSource, *, mask: Mask | None = None, resamples: int = 100, seed: int = 0) -> NoiseFloor:
    """Find the noise floor of a picture from its blocks, counted once.

    Args:
        source: the picture.
        mask: (rows, columns), true where a pixel counts.
        resamples: pairs drawn for each figure; >= 1.
        seed: of the draws; the same seed gives the same numbers.

    Raises:
        InputError: no pixel was counted.

    References:
        Efron & Tibshirani (1993), An Introduction to the Bootstrap, chapter 8; Hall (1985), Resampling a coverage
        pattern, for blocks of a plane.
    """
    return floor_of_blocks(count_blocks(source, mask=mask), resamples=resamples, seed=seed)


def floor_of_blocks(blocks: Blocks, *, resamples: int = 100, seed: int = 0) -> NoiseFloor:
    """Find the noise floor from counts by block; see `noise_floor`."""
    rng = np.random.default_rng(seed)
    lines = SortedLines.of(oklab_to_lab(blocks.colours), spiral_directions(_LINES))
    draws = (_halve_pixels, _halve_blocks, _draw_blocks)
    sampling, split_half, within = (
        float(np.quantile([_distance(lines, *draw(blocks.counts, rng)) for _ in range(resamples)], _QUANTILE))
        for draw in draws
    )
    return NoiseFloor(sampling, split_half, within, len(blocks.counts), resamples)


def judge(difference: float, first: NoiseFloor, second: NoiseFloor) -> Judgement:
    """Say whether a sliced W2 between two pictures is more than noise, given the floors of both."""
    sampling, within = max(first.sampling, second.sampling), max(first.within, second.within)
    if difference > max(sampling, within):
        answer = f"more than parts of one picture differ among themselves ({within:.1f})"
    elif difference > sampling:
        answer = f"more than chance, but no more than parts of one picture differ among themselves ({within:.1f})"
    else:
        answer = f"no more than chance explains ({sampling:.1f})"
    return Judgement(difference, sampling, within, f"The palettes differ by {difference:.1f} ΔE*ab: {answer}.")


def judge_as_dict(difference: float, first: NoiseFloor | None, second: NoiseFloor | None) -> dict[str, Any]:
    """Return `noise` and `verdict` of a pair as JSON values; without both floors nothing is judged."""
    if first is None or second is None:
        said = f"The palettes differ by {difference:.1f} ΔE*ab; a saved palette does not say how much of it is noise."
        return {"noise": None, "verdict": said}
    judgement = judge(difference, first, second)
    noise = {"sampling": judgement.sampling, "within": judgement.within}
    return {"noise": noise, "verdict": judgement.sentence}


def _halve_pixels(counts: Counts, rng: np.random.Generator) -> tuple[Counts, Counts]:
    total = counts.sum(axis=0)
    half = rng.binomial(total, 0.5)  # each pixel goes to one half or the other; exact at any number of pixels
    return half, total - half


def _halve_blocks(counts: Counts, rng: np.random.Generator) -> tuple[Counts, Counts]:
    order = rng.permutation(len(counts))
    half = max(len(counts) // 2, 1)
    return counts[order[:half]].sum(axis=0), counts[order[-half:]].sum(axis=0)


def _draw_blocks(counts: Counts, rng: np.random.Generator) -> tuple[Counts, Counts]:
    first, second = rng.integers(0, len(counts), (2, len(counts)))
    return counts[first].sum(axis=0), counts[second].sum(axis=0)


def _distance(lines: SortedLines, first: Counts, second: Counts) -> float:
    vectors = [lines.quantiles(counts / counts.sum(), _LEVELS) for counts in (first, second) if counts.sum()]
    return float(np.linalg.norm(vectors[0] - vectors[1])) if len(vectors) == 2 else 0.0
