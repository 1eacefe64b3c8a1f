"""The bare glass of a slide: its white point, its shading, and the padding outside the scanned area."""

from __future__ import annotations

from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Mask, read_only

Planes = NDArray[np.floating[Any]]
"""Codes or densities of a thumbnail; single precision is enough, and half as large."""

LEAST_SHARE = 0.01
"""Share of the scanned area below which bare glass is not believed to have been seen."""

_BLACK = 3 / 255
_FLAT = 1.5 / 255
_BAND = 0.06


@attrs.frozen(eq=False)
class Glass:
    """What lies beside the tissue.

    Attributes:
        white: (3,) codes of the glass, 0 … 1: the median over bare glass, or a high percentile where none is seen.
        shading: (height, width, 3) codes of the glass at every place of the thumbnail.
        noise: deviation of the mean optical density of bare glass.
        seen: whether there was bare glass.
        padding: (height, width) true outside the scanned area.
        share: share of the scanned area that is bare glass.
    """

    white: NDArray[np.float64] = attrs.field(converter=read_only)
    shading: Planes
    noise: float
    seen: bool
    padding: Mask
    share: float


def find_glass(thumbnail: Planes, *, ignored: Mask | None = None) -> Glass:
    """Find the bare glass of a slide on its thumbnail.

    Glass is where the picture is flat and as bright as its brightest flat places, allowing for slow shading.

    Args:
        thumbnail: (height, width, 3) codes, 0 … 1.
        ignored: (height, width) true where the slide is not to be looked at.
    """
    padding = find_padding(thumbnail)
    usable = np.asarray(~padding if ignored is None else ~padding & ~ignored)
    bright = thumbnail.mean(axis=2, dtype=np.float64)
    flat = usable & (_roughness(bright) < _FLAT)
    if not usable.any():
        return Glass(np.ones(3), np.ones_like(thumbnail), 0.0, False, padding, 0.0)
    bare = flat & (bright >= _level(bright, flat if flat.any() else usable) - _BAND)
    bare &= _neutral_enough(thumbnail, bare)
    share = float(bare.sum() / usable.sum())
    if share < LEAST_SHARE or bare.sum() < 16:
        white = np.percentile(thumbnail[usable], 99.5, axis=0)
        return Glass(np.maximum(white, 0.02), np.broadcast_to(white, thumbnail.shape), 0.01, False, padding, share)
    shading, bare = _shading(thumbnail, bare, flat)
    density = -np.log10(np.maximum(thumbnail[bare], 1e-3) / shading[bare]).mean(axis=1)
    noise = 1.4826 * float(np.median(np.abs(density - np.median(density))))
    return Glass(
        np.median(thumbnail[bare], axis=0), shading, noise, True, padding, float(bare.sum() / usable.sum())
    )  # fmt: skip


def find_padding(thumbnail: Planes) -> Mask:
    """Return where black joins the border: outside the scanned area. Black within tissue is not padding."""
    from scipy import ndimage

    black = (thumbnail <= _BLACK).all(axis=2)
    if not black.any():
        return np.asarray(black, dtype=bool)
    labels, _ = ndimage.label(black)
    edge = np.unique(np.concatenate([labels[0], labels[-1], labels[:, 0], labels[:, -1]]))
    inside = np.isin(labels, edge[edge > 0])
    return np.asarray(inside, dtype=bool)


def _roughness(plane: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the local deviation over 5 × 5 pixels of a plane whose finest noise is averaged out."""
    from scipy import ndimage

    smooth = ndimage.uniform_filter(plane, 3, mode="nearest")
    mean, square = (ndimage.uniform_filter(p, 5, mode="nearest") for p in (smooth, smooth**2))
    return np.asarray(np.sqrt(np.maximum(square - mean**2, 0.0)))


def _level(bright: NDArray[np.float64], flat: Mask) -> float:
    """Return the brightness of glass: the brightest crowded level among flat places."""
    counts, edges = np.histogram(bright[flat], bins=64, range=(0.0, 1.0))
    crowded = counts >= max(0.02 * counts.sum(), 4)
    top = int(np.flatnonzero(crowded).max()) if crowded.any() else int(counts.argmax())
    peak = max(top - 1, 0) + int(counts[max(top - 1, 0) : top + 1].argmax())
    return float((edges[peak] + edges[peak + 1]) / 2)


def _neutral_enough(thumbnail: Planes, bare: Mask) -> Mask:
    """Return pixels whose colour ratio is that of most bright ones, so that pale flat tissue stays out."""
    if not bare.any():
        return bare
    ratios = np.log10(np.maximum(thumbnail, 1e-3))
    ratios -= ratios.mean(axis=2, keepdims=True)
    away = np.abs(ratios - np.median(ratios[bare], axis=0)).max(axis=2)
    return np.asarray(away < 0.02)


def _shading(thumbnail: Planes, bare: Mask, flat: Mask) -> tuple[Planes, Mask]:
    """Fit a quadratic to the log of the glass, widening to what it explains; returns the fit and the bare glass."""
    y, x = (np.linspace(-1, 1, size) if min(bare.shape) > 1 else np.zeros(size) for size in bare.shape)
    logs = np.log10(np.maximum(thumbnail, 1e-3))
    for _ in range(4):
        used = np.flatnonzero(bare)
        used = used[:: max(1, len(used) // 20_000)]
        down, across = y[used // len(x)], x[used % len(x)]
        terms = np.stack([np.ones_like(down), down, across, down**2, down * across, across**2], axis=1)
        keep = np.diag([0.0, 1.0, 1.0, 3.0, 3.0, 3.0]) * 1e-3 * len(used)  # slow unless the glass says otherwise
        weights = np.linalg.solve(terms.T @ terms + keep, terms.T @ logs.reshape(-1, 3)[used])
        fitted = _quadratic(weights, y, x)
        bare = flat & (np.abs(logs - fitted).max(axis=2) < 0.015)
        if bare.sum() < 16:
            return np.asarray(10.0**fitted), np.asarray(flat)
    return np.asarray(10.0**fitted), bare


def _quadratic(weights: Planes, y: NDArray[np.float64], x: NDArray[np.float64]) -> Planes:
    """Return a quadratic at rows `y` and columns `x`, in single precision as the thumbnail is."""
    level, down, across, down_twice, both, across_twice = weights
    rows = level + y[:, None] * down + y[:, None] ** 2 * down_twice
    columns = x[:, None] * across + x[:, None] ** 2 * across_twice
    fitted = rows.astype(np.float32)[:, None] + columns.astype(np.float32)
    fitted += y.astype(np.float32)[:, None, None] * (x[:, None] * both).astype(np.float32)
    return np.asarray(fitted)
