"""From two slides to the change of stain between them: pairs where the same field is seen twice, else distributions."""

from __future__ import annotations

from collections.abc import Callable

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours
from hueferry.errors import InputError
from hueferry.maps.affine import AffineMap
from hueferry.slides.stains import Vectors, robust_plane
from hueferry.slides.statistics import error_covariance, statistics

Parameters = NDArray[np.float64]

CAUTION = 20.0
"""What the content covariance counts for: halves of one slide are more alike than two slides."""

SPREADS = np.concatenate([[0.25, 0.25], np.full(6, 0.07), np.full(3, 0.08), np.full(3, 0.002)])
"""Deviations expected of a change, before anything is seen: log amounts of two stains, components of their vectors,
log powers of three channels, and density of three channels at glass that was seen."""

_UNSEEN = 0.02
"""The last of these where bare glass was not seen in both slides."""

FALLBACK: Vectors = np.array([[0.65, 0.70, 0.29], [0.07, 0.99, 0.11]])
FALLBACK /= np.linalg.norm(FALLBACK, axis=1, keepdims=True)
"""Haematoxylin and eosin of Ruifrok & Johnston (2001), unit length: where a slide's own stains cannot be told."""

_POINTS, _STEPS, _PALE = 8000, 10, 0.02
_DELTA = 5e-3
"""Quantiles of a sample have kinks; a difference this wide sees past them, so that nearly equal slides have nearly
equal changes."""


_KEEP = (1e-5, 1e-5, 1e-5, 4e-4)
"""What holds a change found from pairs to none, a place: variance of a density (0.004²) over that of the change
(0.13² a component of the matrix, 0.02² the glass), as if a hundred places vouched and not tens of thousands that err
alike. More would pull the weaker stain, which spreads little, towards no change."""


@attrs.frozen(eq=False)
class Sample:
    """Tissue densities of a slide, or of several: (n, 3), and (n,) which block each comes from."""

    density: Colours
    blocks: NDArray[np.int64]


def stain_basis(density: Colours) -> Vectors:
    """Return (2, 3) unit vectors that the change is expressed in; textbook ones where the slide's own are unclear."""
    try:
        return robust_plane(density, least=_PALE).vectors
    except (InputError, np.linalg.LinAlgError):
        return FALLBACK


def change_of(parameters: Parameters, basis: Vectors) -> AffineMap:
    """Return the change of density that (14,) parameters describe; all zero changes nothing.

    Amounts of the two stains are scaled, their vectors replaced, the residual kept, and channels raised to a power.
    """
    turned = basis + parameters[2:8].reshape(2, 3)
    turned /= np.linalg.norm(turned, axis=1, keepdims=True)
    across = np.cross(basis[0], basis[1])
    across /= np.linalg.norm(across)
    reached = np.vstack([np.exp(parameters[:2])[:, None] * turned, across])
    matrix = np.linalg.solve(np.vstack([basis, across]), reached) * np.exp(parameters[8:11])
    return AffineMap(matrix.T, parameters[11:14])


def register_distributions(source: Sample, reference: Sample, *, free_glass: bool) -> AffineMap:
    """Find the most probable change of stain between two slides that do not show the same field.

    The quantiles of the changed source are compared with the reference's; what content alone does to them, measured
    between blocks of each slide, is discounted, and changes larger than staining runs make are improbable.
    Gauss–Newton with damping on the sum of squares.

    Args:
        source: the slide.
        reference: what it is brought towards.
        free_glass: let the density of the glass change too, where bare glass was not seen.
    """
    spreads = np.concatenate([SPREADS[:-3], np.full(3, _UNSEEN)]) if free_glass else SPREADS
    points = source.density[:: max(1, len(source.density) // _POINTS)]
    basis = stain_basis(source.density)
    goal = statistics(reference.density)
    doubt = error_covariance(
        (source.density, source.blocks), (reference.density, reference.blocks), caution=CAUTION
    )  # fmt: skip
    whiten = np.linalg.inv(np.linalg.cholesky(doubt))

    def residual(parameters: Parameters) -> Parameters:
        carried = change_of(parameters, basis)(points)
        return np.concatenate([whiten @ (statistics(carried) - goal), parameters / spreads])

    return change_of(_least_squares(residual, np.zeros(len(SPREADS))), basis)


def _least_squares(residual: Callable[[Parameters], Parameters], start: Parameters) -> Parameters:
    best, damping = start, 0.01
    rest = residual(best)
    for _ in range(_STEPS):
        steps = _DELTA * np.eye(len(best))
        slope = np.stack([(residual(best + step) - residual(best - step)) / (2 * _DELTA) for step in steps], axis=1)
        curve = slope.T @ slope
        while damping < 1e4:
            tried = best - np.linalg.solve(curve + damping * np.diag(np.diag(curve)), slope.T @ rest)
            new = residual(tried)
            if new @ new < rest @ rest:
                break
            damping *= 10
        else:
            return best
        gain = rest @ rest - new @ new
        best, rest, damping = tried, new, damping / 3
        if gain < 1e-5 * (rest @ rest):
            return best
    return best


def register_pairs(
    source: Colours, reference: Colours, weights: NDArray[np.float64], *, free_glass: bool
) -> tuple[AffineMap, float]:
    """Find the change from densities of the same places, robustly; returns it with the median distance left.

    Args:
        source: (n, 3) densities.
        reference: (n, 3) densities of the same places.
        weights: (n,) trust.
        free_glass: let the density of the glass change too, where bare glass was not seen.
    """
    terms = np.hstack([source, np.full((len(source), 1), 1.0 if free_glass else 0.0)])
    start = np.vstack([np.eye(3), np.zeros((1, 3))])
    keep = np.diag(_KEEP) * weights.sum()
    found, trust = start, weights
    for _ in range(20):
        heavy = terms * trust[:, None]
        found = np.linalg.solve(heavy.T @ terms + keep, heavy.T @ reference + keep @ start)
        away = np.linalg.norm(terms @ found - reference, axis=1)
        scale = max(1.4826 * float(np.median(away)), 1e-4)
        trust = weights / (1 + (away / (2 * scale)) ** 2)
    return AffineMap(found[:3].T, found[3]), float(np.median(away))
