"""Many palettes at once: who is near whom, in what order, who stands apart, and a map of them all."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import read_only
from hueferry.errors import InputError
from hueferry.measure.cloud import LabCloud
from hueferry.measure.lines import SortedLines
from hueferry.palettes.palette import Palette
from hueferry.transport.sliced import spiral_directions

Distances = NDArray[np.float64]

_LINES = 32
_LEVELS = 64
_OUTLYING = 3.5
"""Robust score beyond which one stands apart (Iglewicz & Hoaglin 1993, How to Detect and Handle Outliers)."""
_VISIBLE = 1.0
"""ΔE*ab below which nobody sees a difference of palettes: scores are not counted in finer units."""


@attrs.frozen(eq=False)
class Comparison:
    """Three or more palettes, compared each with each.

    Attributes:
        names: (n,) what to call them.
        distances: (n, n) sliced W2 in ΔE*ab (D50), symmetric, 0 on the diagonal.
        order: (n,) indices in the order in which neighbours are most alike.
        scores: (n,) how far each stands from the rest, in robust deviations.
        outliers: indices of those that stand apart.
        positions: (n, 2) a map on which distances are nearly those of the palettes, ΔE*ab; its first axis is the
            direction in which they differ most.
        shown: share of the squared distances that the map shows, 0 … 1.
    """

    names: tuple[str, ...]
    distances: Distances = attrs.field(converter=read_only)
    order: tuple[int, ...]
    scores: NDArray[np.float64] = attrs.field(converter=read_only)
    outliers: tuple[int, ...]
    positions: NDArray[np.float64] = attrs.field(converter=read_only)
    shown: float

    def as_dict(self) -> dict[str, object]:
        """Return everything as JSON values."""
        return {
            "names": list(self.names),
            "distances": self.distances.tolist(),
            "order": list(self.order),
            "scores": self.scores.tolist(),
            "outliers": list(self.outliers),
            "positions": self.positions.tolist(),
            "shown": self.shown,
            "units": {"distances": "ΔE*ab, root mean square (CIE 1976, D50)", "positions": "ΔE*ab", "scores": "1"},
        }


def compare(palettes: Sequence[Palette], names: Sequence[str]) -> Comparison:
    """Compare palettes each with each by the sliced distance: a thousand in seconds.

    Raises:
        InputError: fewer than two palettes, or not as many names.
    """
    if len(palettes) < 2 or len(palettes) != len(names):
        raise InputError(f"give two palettes or more, and a name for each, not {len(palettes)} and {len(names)}")
    distances = distance_matrix(palettes)
    scores = outlier_scores(distances)
    positions, shown = scale_down(distances)
    outliers = tuple(int(i) for i in np.flatnonzero(scores > _OUTLYING))
    return Comparison(tuple(names), distances, seriate(distances), scores, outliers, positions, shown)


def distance_matrix(palettes: Sequence[Palette]) -> Distances:
    """Return the (n, n) sliced W2 in ΔE*ab, as Euclidean distances of quantile vectors."""
    directions = spiral_directions(_LINES)
    clouds = [LabCloud.of(palette) for palette in palettes]
    vectors = np.stack([SortedLines.of(c.colours, directions).quantiles(c.weights, _LEVELS) for c in clouds])
    vectors -= vectors.mean(axis=0)
    norms = np.einsum("ij,ij->i", vectors, vectors)
    squared = norms[:, None] + norms[None, :] - 2 * vectors @ vectors.T
    squared[squared < 1e-10 * max(float(norms.max()), 1e-300)] = 0.0  # rounding of the product form
    distances = np.sqrt(squared)
    np.fill_diagonal(distances, 0.0)
    return np.asarray((distances + distances.T) / 2)


def seriate(distances: Distances) -> tuple[int, ...]:
    """Order items so that neighbours are alike: the Fiedler vector of their similarities.

    Where a perfect order exists, in which distances only grow away from the diagonal, this finds it. Of the two
    directions the one that begins nearer to the first item is taken.

    References:
        Atkins, Boman & Hendrickson (1998), A spectral algorithm for seriation and the consecutive ones problem.
    """
    similarity = distances.max() - distances
    np.fill_diagonal(similarity, 0.0)
    laplacian = np.diag(similarity.sum(axis=1)) - similarity
    fiedler = np.linalg.eigh(laplacian)[1][:, 1]
    order = np.argsort(np.round(fiedler, 12), kind="stable")
    place = np.argsort(order)
    return tuple(int(i) for i in (order if place[0] <= len(order) - 1 - place[0] else order[::-1]))


def outlier_scores(distances: Distances) -> NDArray[np.float64]:
    """Return how far each item stands from the rest, in robust deviations.

    An item's remoteness is its median distance to the others; the score is its excess over the median remoteness in
    units of 1.4826 times the median absolute deviation, but never of less than 1 ΔE*ab.
    """
    others = ~np.eye(len(distances), dtype=bool)
    remoteness = np.array([np.median(row[kept]) for row, kept in zip(distances, others, strict=True)])
    excess = remoteness - np.median(remoteness)
    return np.asarray(excess / max(1.4826 * float(np.median(np.abs(excess))), _VISIBLE))


def scale_down(distances: Distances) -> tuple[NDArray[np.float64], float]:
    """Return (n, 2) positions whose distances are nearly the given ones, and the share of squares they show.

    References:
        Torgerson (1952), Multidimensional scaling: I. Theory and method (classical scaling).
    """
    centring = np.eye(len(distances)) - 1 / len(distances)
    values, vectors = np.linalg.eigh(-centring @ distances**2 @ centring / 2)
    positive = np.clip(values, 0.0, None)
    vectors = vectors[:, ::-1][:, :2]
    lead = np.abs(vectors).argmax(axis=0)
    vectors = vectors * np.where(vectors[lead, range(vectors.shape[1])] < 0, -1.0, 1.0)  # one of two mirror images
    total = float(positive.sum())
    return np.asarray(vectors * np.sqrt(positive[::-1][:2])), float(positive[::-1][:2].sum() / total) if total else 1.0
