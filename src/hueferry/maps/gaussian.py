"""The Gaussian map: means and covariances, with the least displacement."""

from __future__ import annotations

from hueferry.maps.affine import AffineMap
from hueferry.palettes.palette import Palette
from hueferry.transport.gaussian import gaussian_map


def fit_gaussian(source: Palette, target: Palette) -> AffineMap:
    """Return the affine map that carries the source's mean and covariance to the target's.

    References:
        Pitié & Kokaram (2007), The linear Monge-Kantorovitch linear colour mapping.
    """
    matrix = gaussian_map(source.covariance, target.covariance)
    return AffineMap(matrix, target.mean - matrix @ source.mean)
