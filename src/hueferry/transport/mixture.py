"""Transport between Gaussian mixtures: normals carried whole to normals."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Weights, read_only
from hueferry.errors import InputError
from hueferry.transport.exact import solve_exact
from hueferry.transport.gaussian import gaussian_map, gaussian_w2_squared
from hueferry.transport.plan import Plan

Matrix = NDArray[np.float64]

_LOG_2PI = float(np.log(2 * np.pi))


@attrs.frozen(eq=False)
class Mixture:
    """A mixture of k normal distributions in d dimensions.

    Attributes:
        weights: (k,) shares that sum to 1.
        means: (k, d).
        covariances: (k, d, d), symmetric positive definite.
    """

    weights: Weights = attrs.field(converter=read_only)
    means: Matrix = attrs.field(converter=read_only)
    covariances: Matrix = attrs.field(converter=read_only)

    def __attrs_post_init__(self) -> None:
        k, d = self.means.shape
        if self.weights.shape != (k,) or self.covariances.shape != (k, d, d):
            raise InputError(f"{k} means of {d} need (k,) weights and (k, d, d) covariances")
        if abs(float(self.weights.sum()) - 1) > 1e-9 or (self.weights < 0).any():
            raise InputError("mixture weights must be shares that sum to 1")

    def log_densities(self, points: Matrix) -> Matrix:
        """Return (n, k) log densities of (n, d) points under each weighted component, in nats."""
        columns = []
        for weight, mean, covariance in zip(self.weights, self.means, self.covariances, strict=True):
            root = np.linalg.cholesky(covariance)
            scaled = np.linalg.solve(root, (points - mean).T)
            log_volume = np.log(np.diag(root)).sum()
            with np.errstate(divide="ignore"):
                constant = np.log(weight) - log_volume - len(mean) / 2 * _LOG_2PI
            columns.append(constant - 0.5 * (scaled**2).sum(axis=0))
        return np.stack(columns, axis=1)

    def memberships(self, points: Matrix) -> Matrix:
        """Return (n, k) posterior shares of each component at (n, d) points; every row sums to 1."""
        logs = self.log_densities(points)
        shares = np.exp(logs - logs.max(axis=1, keepdims=True))
        return np.asarray(shares / shares.sum(axis=1, keepdims=True))


def fit_mixture_model(
    points: Matrix,
    weights: Weights,
    *,
    components: int,
    seed: int = 0,
    rounds: int = 60,
    floor: float = 1e-4,
    start: Mixture | None = None,
) -> Mixture:
    """Fit a mixture to weighted points by expectation and maximisation.

    Args:
        points: (n, d).
        weights: (n,) shares that sum to 1.
        components: at most; fewer where there are fewer points.
        seed: of the start (weighted k-means++; Arthur & Vassilvitskii 2007).
        rounds: at most.
        floor: variance added to every covariance, in squared units of the points; keeps components from collapsing.
        start: where to begin instead; components of two fits then tend to be those of the same surfaces.

    References:
        Dempster, Laird & Rubin (1977). Each round is a natural gradient step of length 1 in the expectation
        parameters of the complete data (Sato 2000, On-line EM algorithm, section 3).
    """
    kept = weights > 0
    points, weights = points[kept], weights[kept] / weights[kept].sum()
    components = max(1, min(components, len(points)))
    if start is None:
        centres = _spread_out(points, weights, components, seed)
        nearest = ((points[:, None] - centres[None]) ** 2).sum(axis=2).argmin(axis=1)
        shares = np.eye(components)[nearest]
    else:
        shares = start.memberships(points)
    model, last = _maximise(points, weights, shares, floor), -np.inf
    for _ in range(rounds):
        logs = model.log_densities(points)
        peak = logs.max(axis=1, keepdims=True)
        density = np.exp(logs - peak)
        likelihood = float(weights @ (peak[:, 0] + np.log(density.sum(axis=1))))
        model = _maximise(points, weights, density / density.sum(axis=1, keepdims=True), floor)
        if likelihood - last < 1e-6:
            break
        last = likelihood
    return model


def _spread_out(points: Matrix, weights: Weights, count: int, seed: int) -> Matrix:
    rng = np.random.default_rng(seed)
    chosen = [int(rng.choice(len(points), p=weights))]
    distance = ((points - points[chosen[0]]) ** 2).sum(axis=1)
    for _ in range(count - 1):
        pull = distance * weights
        chosen.append(int(rng.choice(len(points), p=pull / pull.sum())) if pull.sum() > 0 else chosen[0])
        distance = np.minimum(distance, ((points - points[chosen[-1]]) ** 2).sum(axis=1))
    return points[chosen]


def _maximise(points: Matrix, weights: Weights, shares: Matrix, floor: float) -> Mixture:
    mass = weights @ shares
    kept = mass > 1e-9
    mass, shares = mass[kept], shares[:, kept]
    means = (weights[:, None] * shares).T @ points / mass[:, None]
    covariances = np.empty((len(mass), points.shape[1], points.shape[1]))
    for index, mean in enumerate(means):
        centred = points - mean
        own = weights * shares[:, index] / mass[index]
        covariances[index] = (centred * own[:, None]).T @ centred + floor * np.eye(points.shape[1])
    return Mixture(mass / mass.sum(), means, covariances)


def solve_mixture(source: Mixture, target: Mixture) -> Plan:
    """Return the cheapest plan between components, with W2² between normals as its costs.

    Its cost is MW2², which is never below W2² between the mixtures.

    References:
        Delon & Desolneux (2020), A Wasserstein-type distance in the space of Gaussian mixture models.
    """
    cost = np.array(
        [
            [gaussian_w2_squared(m0, s0, m1, s1) for m1, s1 in zip(target.means, target.covariances, strict=True)]
            for m0, s0 in zip(source.means, source.covariances, strict=True)
        ]
    )
    return solve_exact(source.weights, target.weights, cost)


def component_maps(source: Mixture, target: Mixture) -> tuple[Matrix, Matrix]:
    """Return the affine maps between components: (k, l, d, d) matrices and (k, l, d) offsets."""
    matrices = np.array([[gaussian_map(s0, s1) for s1 in target.covariances] for s0 in source.covariances])
    offsets = target.means[None, :, :] - np.einsum("klij,kj->kli", matrices, source.means)
    return matrices, offsets
