"""From exact counts to a palette of few weighted colours."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights
from hueferry.colour.spaces import xyz_to_oklab
from hueferry.errors import InputError
from hueferry.palettes.histogram import Histogram
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding

Labels = NDArray[np.int64]
Moments = NDArray[np.float64]

_PAIRS = ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2))
_SAMPLE = 16384
_LARGEST_STRETCH = 1.1
_NEGLIGIBLE = 1e-13  # squared Oklab distance times weight: rounding of the sums, no scatter


def reduce(histogram: Histogram, encoding: Encoding, *, size: int = 1024) -> Palette:
    """Reduce counts to a palette of at most `size` colours in Oklab; deterministic.

    Cells are first joined in pairs a channel (four codes wide at 8 bits), each joint at its mean code; these blocks
    are then grouped. Averaging takes scatter away, most of it where a picture has least, so the means are moved apart
    again until the palette's covariance is that of the pixels; they move by less than they stand for. Scatter inside
    the blocks, a tenth of the whole, is measured on 16,384 cells drawn evenly along the pixels.

    Pixels that are clipped in every channel are left out, for they do not say what colour was there; only where
    nothing else is left do they make the palette.

    Args:
        histogram: exact counts of a picture's codes.
        encoding: how those codes stand for colour.
        size: largest number of colours; >= 1.

    Raises:
        InputError: nothing was counted, or `size` is not positive.

    References:
        Wan, Prusinkiewicz & Wong (1990), Variance-based color image quantization for frame buffer display;
        Wu (1991), Efficient statistical computations for optimal color quantization.
    """
    if size < 1:
        raise InputError(f"a palette of {size} colours holds nothing; ask for at least 1")
    if histogram.pixels == 0:
        return _clipped_palette(histogram, encoding)
    codes = histogram.codes()
    weights = histogram.counts / histogram.pixels
    joined = _join(histogram)
    held = np.bincount(joined, weights).astype(np.float64)
    centres = np.stack([np.bincount(joined, weights * codes[:, c]) / held for c in range(3)], axis=1)
    blocks = xyz_to_oklab(encoding.to_xyz(centres))
    labels = group(blocks, held, size)
    means, shares = _average(blocks, held, labels)
    sample = _systematic_sample(weights)
    drawn = xyz_to_oklab(encoding.to_xyz(codes[sample]))
    inside = drawn - blocks[joined[sample]]
    wanted = _covariance(blocks, held) + _second_moments(inside, np.full(len(inside), 1 / len(inside)))
    colours = _restored(means, shares, wanted)
    spread = _root_mean_square(drawn - colours[labels[joined[sample]]])
    return Palette(colours, shares, spread, histogram.pixels)


def _covariance(colours: Colours, weights: Weights) -> Colours:
    return _second_moments(colours - _mean(colours, weights), weights / weights.sum())


def _mean(colours: Colours, weights: Weights) -> Colours:
    return np.asarray(np.einsum("i,ij->j", weights, colours) / weights.sum())


def _second_moments(colours: Colours, weights: Weights) -> Colours:
    """Return Σ w x xᵀ; not by matrix product, whose last bits may change with the number of threads."""
    columns = np.ascontiguousarray(colours.T)
    return np.asarray(np.einsum("ji,ki->jk", columns * weights, columns))


def _restored(colours: Colours, weights: Weights, wanted: Colours) -> Colours:
    """Stretch colours about their mean until their covariance is `wanted`, but in no direction by more than a tenth.

    With S the covariance there is and T the one wanted, x → S^½ (S^-½ T S^-½)^½ S^-½ x does it. Directions in which
    the colours are flat stay flat.
    """
    mean = _mean(colours, weights)
    values, vectors = np.linalg.eigh(_covariance(colours, weights))
    seen = values > 1e-9 * max(float(values[-1]), _NEGLIGIBLE)
    basis, deviations = vectors[:, seen], np.sqrt(values[seen])
    relative = (basis / deviations).T @ wanted @ (basis / deviations)
    squares, turn = np.linalg.eigh(relative)
    stretch = (turn * np.sqrt(np.clip(squares, 1.0, _LARGEST_STRETCH**2))) @ turn.T
    full = (basis * deviations) @ stretch @ (basis / deviations).T + vectors[:, ~seen] @ vectors[:, ~seen].T
    return np.asarray(mean + (colours - mean) @ full.T)


def thin(palette: Palette, size: int) -> Palette:
    """Reduce a palette further, to at most `size` colours; the spreads add as variances do.

    Raises:
        InputError: `size` is not positive.
    """
    if size < 1:
        raise InputError(f"a palette of {size} colours holds nothing; ask for at least 1")
    if len(palette) <= size:
        return palette
    kept = palette.weights > 0
    colours, weights = palette.colours[kept], palette.weights[kept]
    labels = group(colours, weights, size)
    means, shares = _average(colours, weights, labels)
    moved = float(np.trace(_second_moments(colours - means[labels], weights / weights.sum())))
    return Palette(means, shares, float(np.sqrt(palette.spread**2 + moved)), palette.pixels)


def group(colours: Colours, weights: Weights, size: int) -> Labels:
    """Label (n,) weighted colours by at most `size` groups of little scatter; every group has a member."""
    return _Split.start(colours, weights, size).finish()


def _clipped_palette(histogram: Histogram, encoding: Encoding) -> Palette:
    counts = np.array([histogram.black, histogram.white], dtype=np.int64)
    if not counts.any():
        raise InputError("no pixel was counted; give a mask that leaves some, or a picture with finite pixels")
    codes = np.array([[0.0] * 3, [1.0] * 3])[counts > 0]
    kept = counts[counts > 0]
    return Palette(xyz_to_oklab(encoding.to_xyz(codes)), kept / kept.sum(), 0.0, int(kept.sum()))


def _join(histogram: Histogram) -> Labels:
    """Join two cells a channel into one block, and number the occupied blocks: what splitting works on."""
    half = (histogram.layout.side + 1) // 2
    red, green, blue = (axis >> 1 for axis in histogram.layout.axes(histogram.cells))
    key = (red * half + green) * half + blue
    occupied = np.zeros(half**3, dtype=bool)
    occupied[key] = True
    return np.asarray((np.cumsum(occupied) - 1)[key])


def _features(colours: Colours, weights: Weights) -> Moments:
    """Return (10, n): weight, weighted colour and weighted second moments of each colour."""
    weighted = colours.T * weights
    second = [weighted[i] * colours[:, j] for i, j in _PAIRS]
    return np.concatenate([weights[None], weighted, np.stack(second)])


def _systematic_sample(weights: Weights) -> Labels:
    """Return indices drawn evenly along the summed weights: each stands for the same number of pixels."""
    ticks = (np.arange(_SAMPLE) + 0.5) / _SAMPLE
    return np.searchsorted(np.cumsum(weights) / weights.sum(), ticks)


def _root_mean_square(shifts: Colours) -> float:
    return float(np.sqrt(np.einsum("ij,ij->", shifts, shifts) / len(shifts)))


@attrs.define(eq=False)
class _Split:
    """Groups of colours, cut again and again where the scatter is largest.

    Every round cuts the worse half of all groups at their mean, across their longest axis. A group's moments are
    kept as sums, so a round touches only the colours that move.
    """

    columns: NDArray[np.float64]
    features: Moments
    labels: Labels
    groups: int
    moments: Moments
    scatter: NDArray[np.float64]
    axis: NDArray[np.float64]
    offset: NDArray[np.float64]

    @classmethod
    def start(cls, colours: Colours, weights: Weights, size: int) -> _Split:
        features = _features(colours, weights)
        moments = np.zeros((10, size))
        moments[:, 0] = features.sum(axis=1)
        labels, columns = np.zeros(len(colours), np.int64), np.ascontiguousarray(colours.T)
        split = cls(columns, features, labels, 1, moments, np.zeros(size), np.zeros((3, size)), np.zeros(size))
        split._describe(np.array([0]))
        return split

    def finish(self) -> Labels:
        """Cut until the palette is full or nothing is left to cut; return (n,) labels 0 … groups − 1."""
        while self.groups < len(self.scatter):
            worst = np.flatnonzero(self.scatter[: self.groups] > _NEGLIGIBLE)
            if worst.size == 0:
                break
            room = min(len(self.scatter) - self.groups, (worst.size + 1) // 2)
            self._cut(worst[np.argsort(-self.scatter[worst], kind="stable")[:room]])
        return np.asarray(np.unique(self.labels, return_inverse=True)[1])

    def _describe(self, groups: NDArray[np.int64]) -> None:
        """Work out scatter, longest axis and middle of some groups."""
        weight = self.moments[0, groups]
        mean = self.moments[1:4, groups] / weight
        covariance = np.empty((len(groups), 3, 3))
        for (i, j), second in zip(_PAIRS, self.moments[4:, groups] / weight, strict=True):
            covariance[:, i, j] = covariance[:, j, i] = second - mean[i] * mean[j]
        values, vectors = np.linalg.eigh(covariance)
        self.scatter[groups] = weight * values.sum(axis=1)
        self.axis[:, groups] = vectors[:, :, 2].T
        self.offset[groups] = np.einsum("ig,gi->g", mean, vectors[:, :, 2])

    def _cut(self, chosen: NDArray[np.int64]) -> None:
        fresh = self.groups + np.arange(chosen.size)
        child = np.full(self.groups, -1, dtype=np.int64)
        child[chosen] = fresh
        concerned = np.flatnonzero(child[self.labels] >= 0)
        held = self.labels[concerned]
        along = -self.offset[held]
        for column, axis in zip(self.columns, self.axis, strict=True):
            along += column[concerned] * axis[held]
        moved = concerned[along > 0]
        target = child[self.labels[moved]]
        for row, feature in zip(self.moments, self.features, strict=True):
            gone = np.bincount(target - self.groups, feature[moved], chosen.size)
            row[fresh] = gone
            row[chosen] -= gone
        self.labels[moved] = target
        self.groups += chosen.size
        touched = np.concatenate([chosen, fresh])
        members = np.bincount(self.labels, minlength=self.groups)[touched]
        self._describe(touched[members > 0])
        self.scatter[touched[members <= 1]] = 0.0


def _average(colours: Colours, weights: Weights, labels: Labels) -> tuple[Colours, Weights]:
    """Return the weighted mean colour and the share of each label."""
    held = np.bincount(labels, weights)
    mean = np.stack([np.bincount(labels, weights * colours[:, c]) / held for c in range(3)], axis=1)
    return mean, held / held.sum()
