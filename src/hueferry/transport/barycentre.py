"""Barycentres: what several palettes have in common."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights
from hueferry.errors import InputError
from hueferry.palettes.palette import Palette
from hueferry.transport.costs import squared_distances
from hueferry.transport.exact import solve_exact
from hueferry.transport.gaussian import gaussian_map, gaussian_w2_squared, square_root

Matrix = NDArray[np.float64]

_ROUNDS = 100
_STILL = 1e-13


@attrs.frozen(eq=False)
class NormalBarycentre:
    """The normal distribution nearest to several others in W2.

    Attributes:
        mean: (d,) weighted mean of the means.
        covariance: (d, d).
        residual: largest change of the covariance in the last round, relative to its trace.
        rounds: how many it took.
    """

    mean: Matrix
    covariance: Matrix
    residual: float
    rounds: int


def bures_barycentre(means: Sequence[Matrix], covariances: Sequence[Matrix], weights: Weights) -> NormalBarycentre:
    """Return the Bures–Wasserstein barycentre of normal distributions.

    Args:
        means: k of (d,).
        covariances: k of (d, d), symmetric positive semidefinite.
        weights: (k,) >= 0, summing to 1.

    Raises:
        InputError: counts do not fit, or weights are not shares.

    References:
        Agueh & Carlier (2011); the fixed point S ← S^-1/2 (Σ w (S^1/2 S_i S^1/2)^1/2)² S^-1/2 of Alvarez-Esteban, del
        Barrio, Cuesta-Albertos & Matrán (2016), written here as S ← T S T with T = Σ w T_i of the maps to each.
    """
    shares = checked_shares(weights, len(means))
    if len(covariances) != len(means):
        raise InputError(f"{len(means)} means need as many covariances, not {len(covariances)}")
    mean = np.asarray(shares @ np.stack(means))
    roots = np.stack([square_root(one) for one in covariances])
    current = np.asarray(np.tensordot(shares, roots, 1) @ np.tensordot(shares, roots, 1))
    residual, rounds = np.inf, 0
    while residual >= _STILL and rounds < _ROUNDS:
        rounds += 1
        step = np.tensordot(shares, np.stack([gaussian_map(current, one) for one in covariances]), 1)
        new = step @ current @ step
        residual = float(np.abs(new - current).max() / max(float(np.trace(new)), 1e-300))
        current = (new + new.T) / 2
    return NormalBarycentre(mean, current, residual, rounds)


def checked_shares(weights: Weights, count: int) -> Weights:
    """Return weights that are shares of `count` things.

    Raises:
        InputError: they are not.
    """
    shares = np.asarray(weights, dtype=np.float64)
    if shares.shape != (count,) or count == 0 or not np.isfinite(shares).all() or (shares < 0).any():
        raise InputError(f"{count} things need as many weights, all finite and not negative")
    if abs(float(shares.sum()) - 1) > 1e-9:
        raise InputError(f"weights must sum to 1, not {float(shares.sum()):.12g}")
    return shares


def free_support_barycentre(
    supports: Sequence[Colours], masses: Sequence[Weights], weights: Weights, start: Colours, *, rounds: int = 12
) -> Colours:
    """Return (n, 3) equally weighted colours whose cloud is near the barycentre of several clouds.

    Every round carries the cloud to each of the others by an exact plan and takes the weighted mean of the images.

    Args:
        supports: k of (m, 3).
        masses: k of (m,) shares.
        weights: (k,) shares.
        start: (n, 3) where to begin.
        rounds: at most.

    Raises:
        SolverError: a plan could not be vouched for.

    References:
        Cuturi & Doucet (2014), Fast computation of Wasserstein barycenters, algorithm 2 with step 1.
    """
    shares = checked_shares(weights, len(supports))
    cloud = np.array(start, dtype=np.float64)
    even = np.full(len(cloud), 1 / len(cloud))
    for _ in range(rounds):
        images = np.zeros_like(cloud)
        for share, support, mass in zip(shares, supports, masses, strict=True):
            plan = solve_exact(even, mass, squared_distances(cloud, support))
            images += share * (plan.coupling @ support) / even[:, None]
        moved = float(np.abs(images - cloud).max())
        cloud = images
        if moved < 1e-6:
            break
    return cloud


def robust_shares(palettes: Sequence[Palette], weights: Weights) -> Weights:
    """Return weights under which no palette far from the rest pulls much: those of a geometric median.

    The distance is the Gaussian W2, and the palettes' own typical distance is what "far" is measured in.

    References:
        Weiszfeld (1937); Vardi & Zhang (2000), The multivariate L1-median.
    """
    shares = checked_shares(weights, len(palettes))
    if len(palettes) < 3:
        return shares
    means, covariances = [one.mean for one in palettes], [one.covariance for one in palettes]
    current = shares
    for _ in range(8):
        centre = bures_barycentre(means, covariances, current)
        distance = np.sqrt(
            [gaussian_w2_squared(m, c, centre.mean, centre.covariance) for m, c in zip(means, covariances, strict=True)]
        )
        typical = float(np.median(distance))
        if typical <= 0:
            return current
        pull = shares / np.maximum(distance, 0.5 * typical)
        current = np.asarray(pull / pull.sum())
    return current


def common_palette(palettes: Sequence[Palette], weights: Weights | None = None, *, size: int = 1024) -> Palette:
    """Return what several palettes have in common: their robust barycentre in W2.

    Every palette is carried to the Bures–Wasserstein barycentre of all by its Gaussian map; the carried palettes
    together, each with its share, are the common palette. For palettes that differ by an affine change of colour
    alone this is the barycentre itself; content that differs is averaged as shares, not as colours, so that no colour
    arises that no picture has.

    Args:
        palettes: at least one.
        weights: (k,) shares; None weights all alike. Palettes far from the rest are weighted down.
        size: largest number of colours.

    Raises:
        InputError: there is no palette, or weights are not shares.
    """
    from hueferry.palettes.reduce import thin

    if not palettes:
        raise InputError("there is no palette to find the common one of")
    shares = np.full(len(palettes), 1 / len(palettes)) if weights is None else np.asarray(weights, dtype=np.float64)
    shares = robust_shares(palettes, shares)
    means, covariances = [one.mean for one in palettes], [one.covariance for one in palettes]
    centre = bures_barycentre(means, covariances, shares)
    carried = [
        (one.colours - one.mean) @ gaussian_map(one.covariance, centre.covariance).T + centre.mean for one in palettes
    ]
    together = np.concatenate([share * one.weights for share, one in zip(shares, palettes, strict=True)])
    spread = float(np.sqrt(shares @ np.array([one.spread**2 for one in palettes])))
    pixels = sum(one.pixels for one in palettes)
    return thin(Palette(np.concatenate(carried), together / together.sum(), spread=spread, pixels=pixels), size)


def sliced_barycentre(
    supports: Sequence[Colours],
    masses: Sequence[Weights],
    weights: Weights,
    start: Colours,
    *,
    rounds: int = 60,
    directions: int = 24,
) -> Colours:
    """Return (n, 3) equally weighted colours near the sliced barycentre of several clouds.

    Every round moves the cloud along each of a few evenly spread lines towards the mean of what the clouds want there.

    Args:
        supports: k of (m, 3).
        masses: k of (m,) shares.
        weights: (k,) shares.
        start: (n, 3) where to begin.
        rounds: how many.
        directions: lines a round, turned differently each time.

    References:
        Bonneel, Rabin, Peyré & Pfister (2015), Sliced and Radon Wasserstein barycenters of measures, section 3.
    """
    from hueferry.transport.sliced import turned_directions

    shares = checked_shares(weights, len(supports))
    cloud = np.array(start, dtype=np.float64)
    levels = (np.arange(len(cloud)) + 0.5) / len(cloud)
    for number in range(rounds):
        step = np.zeros_like(cloud)
        for line in turned_directions(directions, 3, seed=number):
            order = np.argsort(cloud @ line, kind="stable")
            wanted = sum(
                share * _quantiles(support @ line, mass, levels)
                for share, support, mass in zip(shares, supports, masses, strict=True)
            )
            step[order] += np.outer(wanted - (cloud @ line)[order], line)
        cloud += step * 3 / directions
    return cloud


def _quantiles(positions: Matrix, mass: Weights, levels: Matrix) -> Matrix:
    order = np.argsort(positions, kind="stable")
    middle = np.cumsum(mass[order]) - mass[order] / 2
    return np.asarray(np.interp(levels, middle, positions[order]))
