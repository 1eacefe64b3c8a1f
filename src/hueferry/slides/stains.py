"""Stain vectors: the directions in optical density along which stains lie, and how much of each a pixel holds."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.errors import InputError

Vectors = NDArray[np.float64]
Amounts = NDArray[np.float64]

LEAST_DENSITY = 0.15
"""Macenko et al. (2009): pixels below this density are too pale to tell a direction."""

EXTREME = 1.0
"""Percent of directions left out at either end of the fan."""

_SPARSITY, _ROUNDS = 0.1, 60
_LOG_STRENGTH = 0.3
"""What a log strength counts for beside a component of a vector: staining runs change it three times as much."""


@attrs.frozen(eq=False)
class Stains:
    """Two stains of a slide.

    Attributes:
        vectors: (2, 3) unit vectors in optical density; the first absorbs more red (as haematoxylin does).
        strengths: (2,) 99th percentile of each stain's amount.
    """

    vectors: Vectors = attrs.field(converter=read_only)
    strengths: NDArray[np.float64] = attrs.field(converter=read_only)

    @property
    def angle(self) -> float:
        """Angle between the two vectors in degrees."""
        return float(np.degrees(np.arccos(np.clip(self.vectors[0] @ self.vectors[1], -1.0, 1.0))))

    def amounts(self, density: Colours) -> Amounts:
        """Return the (n, 2) least-squares amounts of (n, 3) densities; noise may make them negative."""
        return np.asarray(density @ np.linalg.pinv(self.vectors))

    def residual(self, density: Colours) -> Colours:
        """Return the (n, 3) signed part of a density that the two stains do not explain."""
        return np.asarray(density - self.amounts(density) @ self.vectors)


def unmix(density: Colours, vectors: Vectors) -> Amounts:
    """Solve (n, 3) densities for amounts of three stains, rows of `vectors`; the residual is none."""
    return np.asarray(density @ np.linalg.inv(vectors))


def robust_plane(density: Colours, *, least: float = LEAST_DENSITY, extreme: float = EXTREME) -> Stains:
    """Find two stains as the robust edges of the fan of densities in their principal plane.

    Args:
        density: (n, 3) of tissue.
        least: densities whose mean over the channels is below are left out.
        extreme: percentiles taken as edges: this one, and 100 minus it.

    Raises:
        InputError: fewer than 16 densities are strong enough, or they lie on one line.

    References:
        Macenko et al. (2009), A method for normalizing histology slides for quantitative analysis, ISBI, 1107–1110.
    """
    strong = density[density.mean(axis=1) >= least]
    if len(strong) < 16:
        raise InputError(f"only {len(strong)} pixels are stained strongly enough to tell stains apart")
    _, axes = np.linalg.eigh(np.cov(strong, rowvar=False))
    plane = axes[:, [2, 1]]
    plane = plane * np.where(plane.sum(axis=0) < 0, -1.0, 1.0)
    angles = np.arctan2(strong @ plane[:, 1], strong @ plane[:, 0])
    edges = np.percentile(angles, [extreme, 100 - extreme])
    vectors = np.stack([np.cos(edges), np.sin(edges)], axis=1) @ plane.T
    return _named(vectors, density)


def sparse_factors(density: Colours, *, least: float = LEAST_DENSITY, sparsity: float = _SPARSITY) -> Stains:
    """Find two non-negative stains with sparse non-negative amounts, V ≈ H W.

    Projected coordinate descent on ½‖V − H W‖² + λ‖H‖₁ with unit rows of W, started at the edges of the robust plane.

    Args:
        density: (n, 3) of tissue.
        least: densities whose mean is below are left out.
        sparsity: λ, in the units of density; the paper uses 0.1.

    References:
        Vahadane et al. (2016), Structure-preserving color normalization and sparse stain separation for histological
        images, IEEE TMI 35, 1962–1971.
    """
    start = robust_plane(density, least=least)
    strong = np.maximum(density[density.mean(axis=1) >= least], 0.0)
    vectors = np.maximum(start.vectors, 1e-3)
    vectors /= np.linalg.norm(vectors, axis=1, keepdims=True)
    amounts = np.maximum(strong @ np.linalg.pinv(vectors), 0.0)
    for _ in range(_ROUNDS):
        for i in (0, 1):
            rest = strong - amounts[:, [1 - i]] * vectors[1 - i]
            amounts[:, i] = np.maximum(rest @ vectors[i] - sparsity, 0.0)
        for i in (0, 1):
            rest = strong - amounts[:, [1 - i]] * vectors[1 - i]
            turned = np.maximum(amounts[:, i] @ rest, 0.0)
            length = np.linalg.norm(turned)
            if length > 0:
                vectors[i] = turned / length
    return _named(vectors, density)


def _named(vectors: Vectors, density: Colours) -> Stains:
    """Order the vectors, red-absorbing first, and read the strengths."""
    vectors = vectors * np.where(vectors.sum(axis=1, keepdims=True) < 0, -1.0, 1.0)
    vectors = vectors / np.linalg.norm(vectors, axis=1, keepdims=True)
    vectors = vectors[np.argsort(-vectors[:, 0], kind="stable")]
    if abs(vectors[0] @ vectors[1]) > np.cos(np.radians(2.0)):
        raise InputError("the two stains lie within 2 degrees of each other; the slide seems to carry one stain only")
    amounts = density @ np.linalg.pinv(vectors)
    strengths = np.maximum(np.percentile(amounts, 99, axis=0), 1e-3)
    return Stains(vectors, strengths)


def stains_of(density: Colours) -> Stains | None:
    """Return the stains of tissue densities, or None where they cannot be told."""
    try:
        return robust_plane(density)
    except (InputError, np.linalg.LinAlgError):
        return None


def common_stains(found: Sequence[Stains]) -> Stains | None:
    """Return the stains that most of several slides have: the geometric median of vectors and log strengths.

    No minority of slides, however far off, can carry it away. None where there is nothing to choose from.

    References:
        Weiszfeld (1937); Vardi & Zhang (2000), The multivariate L1-median.
    """
    if not found:
        return None
    points = np.array([np.append(one.vectors, np.log(one.strengths)) for one in found])
    scaled = points * np.append(np.ones(6), np.full(2, _LOG_STRENGTH))
    shares = np.full(len(points), 1 / len(points))
    for _ in range(_ROUNDS):
        away = np.linalg.norm(scaled - shares @ scaled, axis=1)
        pull = 1 / np.maximum(away, max(0.1 * float(np.median(away)), 1e-9))
        shares = pull / pull.sum()
    middle = shares @ points
    vectors = middle[:6].reshape(2, 3)
    return Stains(vectors / np.linalg.norm(vectors, axis=1, keepdims=True), np.exp(middle[6:]))


def exchange(density: Colours, own: Stains, reference: Stains) -> Colours:
    """Return (n, 3) densities with `own` vectors and strengths replaced by the reference's; the residual is kept."""
    amounts = own.amounts(density)
    return np.asarray(amounts * (reference.strengths / own.strengths) @ reference.vectors + own.residual(density))


SEPARATIONS: Mapping[str, Callable[[Colours], Stains]] = MappingProxyType(
    {"plane": robust_plane, "sparse": sparse_factors}
)
"""Ways to find the stains of a slide."""
