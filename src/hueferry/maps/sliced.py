"""The sliced map: one-dimensional maps along turned axes, again and again."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights
from hueferry.maps.chain import Chain, Link, rising_between
from hueferry.maps.compose import Composed
from hueferry.maps.gaussian import fit_gaussian
from hueferry.palettes.palette import Palette

ROTATIONS = 20
KNOTS = 48
STEEPEST = 3.0


def fit_sliced(source: Palette, target: Palette, *, seed: int = 0, rotations: int = ROTATIONS) -> Composed:
    """Return the Gaussian map followed by a chain of monotone links along seeded random orthonormal bases.

    References:
        Pitié, Kokaram & Dahyot (2005), N-dimensional probability density function transfer; Rabin, Peyré, Delon &
        Bernot (2011), Wasserstein barycenter and its application to texture mixing.
    """
    affine = fit_gaussian(source, target)
    start = affine(source.colours)
    bases = random_bases(rotations, seed=seed)
    return Composed(affine, chain_between(start, source.weights, target, bases))


def fit_channels(source: Palette, target: Palette) -> Composed:
    """Return the Gaussian map followed by one monotone map a channel of Oklab: lightness, a and b by themselves.

    Channels alone cannot turn a palette; after the Gaussian map they need not.
    """
    affine = fit_gaussian(source, target)
    return Composed(affine, chain_between(affine(source.colours), source.weights, target, [np.eye(3)]))


def chain_between(start: Colours, weights: Weights, target: Palette, bases: list[NDArray[np.float64]]) -> Chain:
    """Build a chain that carries (n, 3) colours towards a palette, one link a basis."""
    links = []
    current = start
    for basis in bases:
        ours, theirs = current @ basis.T, target.colours @ basis.T
        along = [
            rising_between(ours[:, k], weights, theirs[:, k], target.weights, knots=KNOTS, steepest=STEEPEST)
            for k in range(3)
        ]
        link = Link(basis, (along[0], along[1], along[2]))
        current = link(current)
        links.append(link)
    return Chain(links)


def random_bases(count: int, *, seed: int) -> list[NDArray[np.float64]]:
    """Draw orthonormal bases of three dimensions, uniformly (QR of normal matrices, signs fixed; Mezzadri 2007)."""
    rng = np.random.default_rng(seed)
    bases = []
    for _ in range(count):
        q, r = np.linalg.qr(rng.standard_normal((3, 3)))
        bases.append(np.asarray(q * np.sign(np.diag(r))))
    return bases
