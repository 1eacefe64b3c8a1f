"""Transport between normal distributions, in closed form."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError

Matrix = NDArray[np.float64]

_FLOOR = 1e-12
"""Smallest variance, relative to the largest, that is divided by; below it a direction counts as flat."""


def square_root(covariance: Matrix) -> Matrix:
    """Return the symmetric positive semidefinite square root of a (d, d) covariance."""
    values, vectors = _eigen(covariance)
    return np.asarray((vectors * np.sqrt(values)) @ vectors.T)


def gaussian_map(source: Matrix, target: Matrix) -> Matrix:
    """Return the symmetric (d, d) matrix A ⪰ 0 with A · source · A = target that moves least.

    Directions in which the source is flat are left as they are: nothing there could be stretched into the target.

    Args:
        source: (d, d) covariance.
        target: (d, d) covariance.

    References:
        Dowson & Landau (1982); Olkin & Pukelsheim (1982): A = S^-1/2 (S^1/2 T S^1/2)^1/2 S^-1/2.
    """
    values, vectors = _eigen(source)
    seen = values > _FLOOR * max(float(values.max()), 1e-300)
    if not seen.any():
        return np.eye(len(values))
    basis = vectors[:, seen]
    deviation = np.sqrt(values[seen])
    inner = deviation[:, None] * (basis.T @ target @ basis) * deviation[None, :]
    middle = square_root(inner) / (deviation[:, None] * deviation[None, :])
    unseen = vectors[:, ~seen]
    return np.asarray(basis @ middle @ basis.T + unseen @ unseen.T)


def bures_squared(source: Matrix, target: Matrix) -> float:
    """Return the squared Bures distance between two covariances: tr S + tr T − 2 tr (S^1/2 T S^1/2)^1/2."""
    root = square_root(source)
    cross = np.sqrt(np.clip(np.linalg.eigvalsh(root @ target @ root), 0.0, None)).sum()
    return float(max(np.trace(source) + np.trace(target) - 2 * cross, 0.0))


def gaussian_w2_squared(
    source_mean: Matrix, source_covariance: Matrix, target_mean: Matrix, target_covariance: Matrix
) -> float:
    """Return W2² between two normal distributions (Givens & Shortt 1984)."""
    shift = np.asarray(source_mean) - np.asarray(target_mean)
    return float(shift @ shift) + bures_squared(source_covariance, target_covariance)


def _eigen(covariance: Matrix) -> tuple[Matrix, Matrix]:
    covariance = np.asarray(covariance, dtype=np.float64)
    if covariance.ndim != 2 or covariance.shape[0] != covariance.shape[1] or not np.isfinite(covariance).all():
        raise InputError("a covariance is a square matrix of finite numbers")
    values, vectors = np.linalg.eigh((covariance + covariance.T) / 2)
    if values.min() < -1e-9 * max(float(values.max()), 1e-300):
        raise InputError(f"a covariance has no negative eigenvalue, and this one has {values.min():.3g}")
    return np.clip(values, 0.0, None), vectors
