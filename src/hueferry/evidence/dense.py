"""Colours read densely from two pictures that show the same surfaces."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Mask
from hueferry.evidence.reduced import Reduced

_FINE = 1 << 16
"""Steps of roughness, 0 … 1, that are told apart."""

_SIDE = 40
"""Cells of colours along each axis: 40³ numbers fit into 16 bits, and hold every colour that is not a light source."""

_BEFORE = np.array([4, 20, 20])
"""Cells before 0 along L, a and b."""

MOST = 3000
"""Pairs kept at most: rare colours first."""

CELL = 0.04
"""Side of the Oklab cells that pairs are spread over."""

FLATTER = 0.6
"""Share of every cell that is kept, the flattest pixels first."""

LEAST_CORRELATION = 0.3
"""Local correlation below which textures are different surfaces: something stands in front, or moved."""

COMMON = 0.45
"""Share of the textured pixels that have to show the same surfaces."""

_TEXTURED = 300.0
_BLOCKS = 4


@attrs.frozen(eq=False)
class DenseColours:
    """Colours of the same surfaces, with the (n, 2) source pixel (x, y) and the block each lies in; see `Pairs`."""

    source: Colours
    reference: Colours
    weights: NDArray[np.float64]
    places: NDArray[np.int64]
    blocks: NDArray[np.int64]
    low: NDArray[np.bool_]
    high: NDArray[np.bool_]
    coverage: float
    homography: NDArray[np.float64]


def read_colours(source: Reduced, reference: Reduced, homography: NDArray[np.float64]) -> DenseColours | None:
    """Read local colours of `source` and of `reference` brought onto it, where both are flat and neither clips.

    Returns:
        None where fewer than 50 pixels are left, or where most of what has texture looks different: then something
        small is common to both, such as a caption, and not the surfaces.
    """
    import cv2

    homography = snap(homography, source, reference)
    size = source.gray.shape[1], source.gray.shape[0]
    ours, theirs = _same_sharpness(source.oklab, reference.oklab, homography)
    flags = cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP
    warped = np.asarray(
        cv2.warpPerspective(theirs, homography, size, flags=flags, borderMode=cv2.BORDER_REPLICATE), dtype=np.float32
    )
    good = reference.usable.astype(np.float32)
    low, high = (
        cv2.warpPerspective(_nearby(ends), homography, size, flags=flags) for ends in (reference.low, reference.high)
    )
    seen = cv2.warpPerspective(np.ones_like(good), homography, size, flags=flags) > 0.99
    valid = cv2.warpPerspective(good, homography, size, flags=flags) > 0.99
    valid &= source.usable
    valid = cv2.erode(valid.astype(np.uint8), np.ones((3, 3), np.uint8), borderValue=0) > 0
    gray = np.asarray(cv2.warpPerspective(reference.gray, homography, size, flags=flags), dtype=np.uint8)
    alike = _alike(source.gray, gray, valid)
    if alike is None:
        return None
    valid &= alike
    ours, roughness = _local(ours)
    warped, other_roughness = _local(warped)
    roughness = np.hypot(roughness, other_roughness)
    if valid.sum() < 50:
        return None
    picked = _spread_over_colours(ours, valid, roughness)
    rows, columns = np.divmod(picked, size[0])
    blocks = (rows * _BLOCKS // size[1]) * _BLOCKS + columns * _BLOCKS // size[0]
    weights = 1 / (0.01**2 + roughness.ravel()[picked] ** 2) * np.where(source.clipped.ravel()[picked], 0.3, 1.0)
    return DenseColours(
        source=ours.reshape(-1, 3)[picked].astype(np.float64),
        reference=warped.reshape(-1, 3)[picked].astype(np.float64),
        weights=weights / weights.mean(),
        places=np.column_stack([columns, rows]),
        blocks=blocks,
        low=low.reshape(-1, 3)[picked] > 0.5,
        high=high.reshape(-1, 3)[picked] > 0.5,
        coverage=float(seen.mean()),
        homography=homography,
    )


def snap(homography: NDArray[np.float64], source: Reduced, reference: Reduced) -> NDArray[np.float64]:
    """Return the pure shift by whole pixels that `homography` is within 0.75 pixels of, or itself."""
    height, width = source.gray.shape
    corners = np.array([[0, 0, 1], [width, 0, 1], [0, height, 1], [width, height, 1.0]])
    carried = corners @ homography.T
    carried = carried[:, :2] / carried[:, 2:]
    # Only corners that fall inside the reference have to agree.
    tall, wide = reference.gray.shape
    moves = np.clip(carried, 0, [wide, tall]) - carried
    near = np.abs(moves).max(axis=1) < max(width, height) * 0.1
    shift = np.rint(np.median(carried - corners[:, :2], axis=0))
    off = np.abs(carried - corners[:, :2] - shift).max(axis=1)
    if (off[near] < 0.75).all() and off.max() < 2.5:
        return np.array([[1, 0, shift[0]], [0, 1, shift[1]], [0, 0, 1.0]])
    return homography


def _same_sharpness(
    ours: NDArray[np.float32], theirs: NDArray[np.float32], homography: NDArray[np.float64]
) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    """Blur the finer of the two by what the scale between them takes away."""
    import cv2

    centre = np.array([ours.shape[1] / 2, ours.shape[0] / 2, 1.0])
    scale = float(np.sqrt(np.abs(np.linalg.det(homography) / (homography[2] @ centre) ** 3)))
    if scale > 1.15:
        theirs = np.asarray(cv2.GaussianBlur(theirs, (0, 0), 0.5 * scale), dtype=np.float32)
    elif scale < 1 / 1.15:
        ours = np.asarray(cv2.GaussianBlur(ours, (0, 0), 0.5 / scale), dtype=np.float32)
    return ours, theirs


def _alike(ours: NDArray[np.uint8], theirs: NDArray[np.uint8], valid: Mask) -> Mask | None:
    """Tell where two evened-out pictures (height, width) show the same, or at least no texture to the contrary.

    Returns:
        None where less than `COMMON` of the textured pixels among `valid` show the same.
    """
    import cv2

    def mean(plane: NDArray[np.float32]) -> NDArray[np.float32]:
        return np.asarray(cv2.blur(plane, (17, 17)), dtype=np.float32)

    here, there = ours.astype(np.float32), theirs.astype(np.float32)
    mean_here, mean_there = mean(here), mean(there)
    spread_here, spread_there = mean(here * here) - mean_here**2, mean(there * there) - mean_there**2
    common = mean(here * there) - mean_here * mean_there
    same = common > LEAST_CORRELATION * np.sqrt(np.maximum(spread_here * spread_there, 1e-6))
    textured = np.maximum(spread_here, spread_there) > _TEXTURED
    judged = textured & valid
    if judged.any() and same[judged].mean() < COMMON:
        return None
    return np.asarray(same | ~textured)


def _nearby(ends: NDArray[np.bool_]) -> NDArray[np.float32]:
    """Spread (height, width, 3) flags over the 5 × 5 pixels that a local colour is the mean of."""
    import cv2

    return np.asarray(cv2.dilate(ends.astype(np.float32), np.ones((5, 5), np.uint8)))


def _local(oklab: NDArray[np.float32]) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    """Return the mean over 5 × 5 pixels and the root mean square deviation from it."""
    import cv2

    mean = np.asarray(cv2.blur(oklab, (5, 5)), dtype=np.float32)
    variance = (cv2.blur(oklab * oklab, (5, 5)) - mean * mean).sum(axis=2)
    return mean, np.sqrt(np.maximum(variance, 0))


def _spread_over_colours(
    oklab: NDArray[np.float32], valid: NDArray[np.bool_], roughness: NDArray[np.float32]
) -> NDArray[np.int64]:
    """Pick at most `MOST` pixels: the flatter part of every cell of colours, each by the root of its share."""
    places = np.flatnonzero(valid)
    cells = np.clip(np.floor(oklab.reshape(-1, 3)[places] / CELL) + _BEFORE, 0, _SIDE - 1).astype(np.uint16)
    # Sorting 16-bit keys takes NumPy a fifth of the time of longer ones, so there are two: first the lesser one.
    rough = np.minimum(roughness.ravel()[places] * _FINE, _FINE - 1).astype(np.uint16)
    flattest = np.argsort(rough, kind="stable")
    number = (cells[:, 0] * _SIDE + cells[:, 1]) * _SIDE + cells[:, 2]
    order = flattest[np.argsort(number[flattest], kind="stable")]
    places, number = places[order], number[order]
    first = np.flatnonzero(np.r_[True, number[1:] != number[:-1]])
    counts = np.diff(np.r_[first, len(places)])
    rank = np.arange(len(places)) - np.repeat(first, counts)
    flat = rank < np.repeat(np.ceil(counts * FLATTER), counts)
    quota = np.repeat(1 / np.sqrt(counts), counts)[flat]
    places = places[flat]
    if len(places) <= MOST:
        return np.sort(places)
    lots = np.random.default_rng(0).exponential(size=len(places)) / quota
    return np.sort(places[np.argpartition(lots, MOST)[:MOST]])
