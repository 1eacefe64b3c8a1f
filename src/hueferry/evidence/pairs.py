"""Pairs: the same surface seen in both pictures.

Keypoints on evened-out lightness are matched, a homography is asked whether it explains them better than chance
could, and only then are colours read, densely, where both pictures are flat.
"""

from __future__ import annotations

from math import lgamma, log, pi
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.evidence.estimate import lacking
from hueferry.evidence.keypoints import match
from hueferry.evidence.reduced import Reduced

Points = NDArray[np.float64]
Homography = NDArray[np.float64]

REACH = 3.0
"""Reduced pixels within which a keypoint counts as explained."""

FEWEST = 8
"""Explained keypoints below which nothing is believed."""

SURE = -8.0
"""log10 of the expected number of chance explanations as good as this one, at most."""


@attrs.frozen(eq=False)
class Pairs:
    """Colours of the same surfaces in two pictures.

    Attributes:
        source: (n, 3) Oklab.
        reference: (n, 3) Oklab.
        weights: (n,) how far each is to be trusted, mean 1.
        blocks: (n,) which of the source's 4 × 4 blocks it lies in, 0 … 15.
        low: (n, 3) where a channel of the reference is clipped at its lower end.
        high: (n, 3) the same at its upper end.
        coverage: share of the source picture that the reference shows, 0 … 1.
        inliers: keypoints that the homography explains.
        matches: keypoints that were matched.
        homography: (3, 3) reduced source pixel (x, y) to reduced reference pixel.
        chance: log10 of the number of chance explanations to expect.
    """

    source: Colours = attrs.field(converter=read_only)
    reference: Colours = attrs.field(converter=read_only)
    weights: NDArray[np.float64] = attrs.field(converter=read_only)
    blocks: NDArray[np.int64]
    low: NDArray[np.bool_]
    high: NDArray[np.bool_]
    coverage: float
    inliers: int
    matches: int
    homography: Homography = attrs.field(converter=read_only)
    chance: float

    def residual(self, carried: Colours) -> Colours:
        """Return (n, 3) what `carried` source colours lack of the reference; see `lacking`."""
        return lacking(carried, self.reference, low=self.low, high=self.high)

    def part(self, chosen: NDArray[np.bool_]) -> Pairs:
        """Return the pairs where (n,) `chosen` is true."""
        return attrs.evolve(
            self,
            source=self.source[chosen],
            reference=self.reference[chosen],
            weights=self.weights[chosen],
            blocks=self.blocks[chosen],
            low=self.low[chosen],
            high=self.high[chosen],
        )

    def __len__(self) -> int:
        return len(self.source)


def find_pairs(source: Reduced, reference: Reduced) -> Pairs | None:
    """Find the surfaces that both pictures show, or None where chance explains the likeness as well."""
    from hueferry.evidence.dense import read_colours

    here, there = match(source.keypoints, reference.keypoints)
    found = find_homography(here, there, reference.gray.shape)
    if found is None:
        return None
    homography, inside, chance = found
    dense = read_colours(source, reference, homography)
    if dense is None:
        return None
    return Pairs(
        source=dense.source, reference=dense.reference, weights=dense.weights, blocks=dense.blocks,
        low=dense.low,
        high=dense.high,
        coverage=dense.coverage, inliers=int(inside.sum()), matches=len(here), homography=dense.homography,
        chance=chance,
    )  # fmt: skip


def find_homography(
    here: Points, there: Points, shape: tuple[int, int]
) -> tuple[Homography, NDArray[np.bool_], float] | None:
    """Find the homography that carries `here` (n, 2) to `there` (n, 2), or None where none is beyond chance.

    Args:
        here: pixels (x, y) in the source.
        there: pixels in the reference, row by row the same surface, or a mistake.
        shape: (rows, columns) of the reference: where a chance match could have fallen.

    References:
        Barath et al. (2020), MAGSAC++; Moisan & Stival (2004), A probabilistic criterion to detect rigid point
        matches (the number of false alarms).
    """
    import cv2

    if len(here) < FEWEST:
        return None
    found: Any = cv2.findHomography(here, there, cv2.USAC_MAGSAC, REACH, maxIters=3000, confidence=0.999)[0]
    if found is None:
        return None
    homography = np.asarray(found, dtype=np.float64)
    if not np.isfinite(homography).all() or not _is_sane(homography, here):
        return None
    inside = np.linalg.norm(carry(homography, here) - there, axis=1) < REACH
    distinct = min(_distinct(here[inside]), _distinct(there[inside]))
    chance = _log_false_alarms(len(here), distinct, pi * REACH**2 / (shape[0] * shape[1]))
    if distinct < FEWEST or chance > SURE:
        return None
    return homography, inside, chance


def carry(homography: Homography, points: Points) -> Points:
    """Carry (n, 2) pixels (x, y) over."""
    lifted = np.column_stack([points, np.ones(len(points))]) @ homography.T
    return np.asarray(lifted[:, :2] / lifted[:, 2:])


def _is_sane(homography: Homography, points: Points) -> bool:
    """Refuse mirrors, foldings and scales beyond 1 : 12 over the hull of the points."""
    low, high = points.min(axis=0), points.max(axis=0)
    corners = np.array([low, [high[0], low[1]], high, [low[0], high[1]], (low + high) / 2])
    depth = np.column_stack([corners, np.ones(5)]) @ homography[2]
    if depth.min() * depth.max() <= 0:
        return False
    scales = np.linalg.det(homography) / depth**3  # determinant of the local Jacobian
    return bool(scales.min() > 1 / 144 and scales.max() < 144 and scales.max() / scales.min() < 50)


def _distinct(points: Points) -> int:
    """Count points no two of which stand in the same cell of 4 pixels: repeated keypoints are one witness."""
    return len(np.unique(np.floor(points / 4).astype(np.int64), axis=0)) if len(points) else 0


def _log_false_alarms(matches: int, explained: int, chance: float) -> float:
    """log10 of (n − 4) · C(n, k) · C(k, 4) · p^(k − 4): Moisan & Stival (2004), equation for n matches, k explained."""
    if explained <= 4:
        return 0.0
    choices = log(max(matches - 4, 1)) + _log_choose(matches, explained) + _log_choose(explained, 4)
    return (choices + (explained - 4) * log(chance)) / log(10)


def _log_choose(n: int, k: int) -> float:
    return lgamma(n + 1) - lgamma(k + 1) - lgamma(n - k + 1)
