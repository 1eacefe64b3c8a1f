"""The Gaussian map: means and covariances, with the least displacement."""

from __future__ import annotations

import numpy as np

from hueferry.maps.affine import AffineMap
from hueferry.palettes.palette import Palette
from hueferry.transport.gaussian import gaussian_map

THIN = 0.005
"""Standard deviation in Oklab below which a direction holds noise and rounding rather than colour."""


def fit_gaussian(source: Palette, target: Palette) -> AffineMap:
    """Return the affine map that carries the source's mean and covariance to the target's.

    Where the source is thinner than `THIN` in some direction, as a nearly gray picture is, that much noise is granted
    to both palettes: stretching grain into colour would tear it apart. Elsewhere both are matched exactly.

    References:
        Pitié & Kokaram (2007), The linear Monge-Kantorovitch linear colour mapping.
    """
    ours, theirs = source.covariance, target.covariance
    if 0 < np.linalg.eigvalsh(ours)[0] < THIN**2:
        ours, theirs = ours + THIN**2 * np.eye(3), theirs + THIN**2 * np.eye(3)
    matrix = gaussian_map(ours, theirs)
    return AffineMap(matrix, target.mean - matrix @ source.mean)
