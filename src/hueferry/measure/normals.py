"""How distinguishable two normal distributions are.

Palettes are compared through the normals that have their mean and covariance. All figures but the transport costs are
the same whatever the units: an affine change of coordinates changes none of them.
"""

from __future__ import annotations

from itertools import pairwise

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import read_only
from hueferry.errors import InputError

Matrix = NDArray[np.float64]

_FLAT = 1e-10
"""Variance, relative to the largest of the two, below which a direction counts as flat."""
_STEPS = 64


@attrs.frozen(eq=False)
class Normal:
    """A normal distribution.

    Attributes:
        mean: (d,).
        covariance: (d, d), symmetric positive semidefinite.
    """

    mean: Matrix = attrs.field(converter=read_only)
    covariance: Matrix = attrs.field(converter=read_only)

    @covariance.validator
    def _check(self, _: object, value: Matrix) -> None:
        if self.mean.ndim != 1 or value.shape != (len(self.mean),) * 2:
            raise InputError(f"a mean of {self.mean.shape} needs a square covariance of its size, not {value.shape}")
        if not np.isfinite(value).all() or not np.isfinite(self.mean).all():
            raise InputError("means and covariances must be finite")

    def along(self, channel: int) -> Normal:
        """Return the distribution of one coordinate alone."""
        return Normal(self.mean[channel : channel + 1], self.covariance[channel : channel + 1, channel : channel + 1])


def kullback_leibler(p: Normal, q: Normal) -> float:
    """Return KL(p | q) in nats; infinite where p is spread and q is flat, or the reverse.

    References:
        Kullback (1959), Information Theory and Statistics, chapter 9.
    """
    common = _on_common_support(p, q)
    if common is None:
        return float("inf")
    shift, variance = common
    return float((variance - 1 - np.log(variance)).sum() + shift @ shift) / 2


def jeffreys(p: Normal, q: Normal) -> float:
    """Return KL(p | q) + KL(q | p) in nats (Jeffreys 1946)."""
    return kullback_leibler(p, q) + kullback_leibler(q, p)


def bhattacharyya(p: Normal, q: Normal) -> float:
    """Return the Bhattacharyya distance in nats (Bhattacharyya 1943; Kailath 1967)."""
    common = _on_common_support(p, q)
    if common is None:
        return float("inf")
    shift, variance = common
    middle = (1 + variance) / 2
    return float((shift**2 / middle).sum() / 8 + (np.log(middle) - np.log(variance) / 2).sum() / 2)


def hellinger(p: Normal, q: Normal) -> float:
    """Return the Hellinger distance √(1 − ∫ √(p q)), 0 … 1."""
    return float(np.sqrt(-np.expm1(-bhattacharyya(p, q))))


def fisher_rao_1d(p: Normal, q: Normal) -> float:
    """Return the Fisher–Rao distance between two normals on a line: √2 times that of the hyperbolic half-plane.

    With m = mean / √2 and s the deviation the metric (dmean² + 2 ds²) / s² is twice the half-plane's, hence
    √2 arccosh(1 + ((Δmean)² / 2 + (Δs)²) / (2 s₁ s₂)); the ½ belongs to the mean. Here in the equal form
    2√2 arcsinh(√(…) / 2), which keeps its digits for near neighbours.

    References:
        Rao (1945); Atkinson & Mitchell (1981), Rao's distance measure; Costa, Santos & Strapasson (2015), Fisher
        information distance: a geometrical reading.
    """
    if len(p.mean) != 1 or len(q.mean) != 1:
        raise InputError(f"this distance is for one coordinate, not {len(p.mean)} and {len(q.mean)}")
    first, second = (float(np.sqrt(max(n.covariance[0, 0], 0.0))) for n in (p, q))
    step = float(p.mean[0] - q.mean[0])
    if min(first, second) <= np.sqrt(_FLAT) * max(first, second):
        return 0.0 if first == second == step == 0 else float("inf")
    return float(2 * np.sqrt(2) * np.arcsinh(np.sqrt((step**2 / 2 + (first - second) ** 2) / (4 * first * second))))


def fisher_rao_bounds(p: Normal, q: Normal) -> tuple[float, float]:
    """Return a lower and an upper bound of the Fisher–Rao distance between two normals of any dimension.

    No closed form is known for different means and covariances; for equal means both are √(½ Σ ln² λ) within 1e-4,
    λ the eigenvalues of one covariance relative to the other.

    The lower bound is the geodesic distance of the embedding (mean, covariance) → positive matrices of one dimension
    more. The upper bound is the length of a path between the two: the embedding's geodesic, brought back, in steps
    each of which is no longer than the square root of its Jeffreys divergence.

    References:
        Calvo & Oller (1990), A distance between multivariate normal distributions based in an embedding into the
        Siegel group; Nielsen (2023), A simple approximation method for the Fisher–Rao distance between multivariate
        normal distributions; Pinele, Strapasson & Costa (2020) on what is known in closed form.
    """
    common = _on_common_support(p, q)
    if common is None:
        return float("inf"), float("inf")
    shift, variance = common
    if len(shift) == 0:
        return 0.0, 0.0
    first = np.eye(len(shift) + 1)
    second = _embed(shift, np.diag(variance))
    roots, vectors = np.linalg.eigh(second)
    logs = np.log(roots)
    path = [_normal_of((vectors * np.exp(share * logs)) @ vectors.T) for share in np.linspace(0, 1, _STEPS + 1)]
    path[0], path[-1] = _normal_of(first), _normal_of(second)
    upper = sum(np.sqrt(max(jeffreys(a, b), 0.0)) for a, b in pairwise(path))
    lower = float(np.sqrt((logs**2).sum() / 2))
    return lower, max(lower, float(upper))


def _embed(mean: Matrix, covariance: Matrix) -> Matrix:
    top = np.concatenate([covariance + np.outer(mean, mean), mean[:, None]], axis=1)
    return np.concatenate([top, np.append(mean, 1.0)[None]], axis=0)


def _normal_of(matrix: Matrix) -> Normal:
    """Bring a positive matrix of one dimension more back to a normal: its own scale is dropped."""
    scale = matrix[-1, -1]
    mean = matrix[:-1, -1] / scale
    return Normal(mean, matrix[:-1, :-1] - scale * np.outer(mean, mean))


def _on_common_support(p: Normal, q: Normal) -> tuple[Matrix, Matrix] | None:
    """Choose coordinates in which q is standard and p has independent parts.

    Returns:
        The (k,) mean and (k,) variances of p there; None where one of the two is flat and the other is not, or their
        means differ in a direction in which both are flat: then each gives the other no probability at all.
    """
    if p.mean.shape != q.mean.shape:
        raise InputError(f"normals of {len(p.mean)} and {len(q.mean)} coordinates cannot be compared")
    shift = p.mean - q.mean
    values, vectors = np.linalg.eigh(p.covariance + q.covariance)
    spread = values > _FLAT * max(float(values[-1]), 0.0)
    if np.abs(vectors[:, ~spread].T @ shift).max(initial=0.0) > 1e-5 * float(np.sqrt(max(values[-1], 0.0))):
        return None
    if not spread.any():
        return np.zeros(0), np.zeros(0)
    basis = vectors[:, spread] / np.sqrt(values[spread])
    share, turn = np.linalg.eigh(basis.T @ p.covariance @ basis)  # p + q is the identity here
    if share[0] < _FLAT or share[-1] > 1 - _FLAT:
        return None
    deviation = np.sqrt(1 - share)
    return np.asarray((shift @ basis @ turn) / deviation), np.asarray(share / (1 - share))
