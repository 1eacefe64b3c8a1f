"""The exact plan as a map: barycentric projection on the palette, smoothly continued around it."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights, read_only
from hueferry.maps.compose import Composed
from hueferry.maps.entropic import trust_of
from hueferry.maps.gaussian import fit_gaussian
from hueferry.palettes.palette import Palette
from hueferry.transport.costs import squared_distances
from hueferry.transport.exact import solve_exact

BANDWIDTH = 0.02
"""Oklab distance over which neighbouring displacements are averaged: what a lattice can follow."""

_BLOCK = 512


@attrs.frozen(eq=False)
class Displacements:
    """x ↦ x + a weighted mean of the displacements near x; none far away.

    Attributes:
        points: (n, 3) where displacements are known.
        shifts: (n, 3) displacements.
        weights: (n,) how much each counts.
        bandwidth: standard deviation of the averaging kernel.
        level: soft squared distance that the points themselves have; shifts are taken whole up to it.

    References:
        Nadaraya (1964), On estimating regression.
    """

    points: Colours = attrs.field(converter=read_only)
    shifts: Colours = attrs.field(converter=read_only)
    weights: Weights = attrs.field(converter=read_only)
    bandwidth: float
    level: float = 0.0

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        shifts, soft = self.evaluate(colours)
        return np.asarray(colours + trust_of(soft - self.level, 2 * self.bandwidth)[:, None] * shifts)

    def evaluate(self, colours: Colours) -> tuple[Colours, NDArray[np.float64]]:
        """Return the mean shift (n, 3) near colours, and their soft squared distance from the points (n,)."""
        seen = self.weights > 0
        points = self.points[seen].astype(np.float32)
        values = np.concatenate([self.shifts[seen], np.ones((len(points), 1))], axis=1).astype(np.float32)
        scale = np.float32(1 / (2 * self.bandwidth**2))
        bias = np.log(self.weights[seen]).astype(np.float32) - (points**2).sum(axis=1) * scale
        shifts, soft = np.empty((len(colours), 3)), np.empty(len(colours))
        for start in range(0, len(colours), _BLOCK):
            part = slice(start, start + _BLOCK)
            x = colours[part].astype(np.float32)
            exponent = x @ (points.T * (2 * scale)) + bias
            peak = exponent.max(axis=1)
            np.exp(np.maximum(exponent - peak[:, None], -60), out=exponent)
            sums = exponent @ values
            shifts[part] = sums[:, :3] / sums[:, 3:]
            soft[part] = (x**2).sum(axis=1) - (peak + np.log(sums[:, 3])) / scale
        return shifts, soft


def fit_exact(source: Palette, target: Palette, *, bandwidth: float = BANDWIDTH) -> Composed:
    """Return the Gaussian map followed by the barycentric projection of the exact plan of what it leaves.

    The plan sends each source colour to one or a few target colours; their mean is where the map sends it.

    Raises:
        SolverError: the plan could not be vouched for.

    References:
        Ambrosio, Gigli & Savaré (2005), Gradient flows, section 5.4 (barycentric projection).
    """
    affine = fit_gaussian(source, target)
    start = affine(source.colours)
    plan = solve_exact(source.weights, target.weights, squared_distances(start, target.colours))
    images = barycentric_projection(plan.coupling, target.colours, otherwise=start)
    near = Displacements(start, images - start, source.weights, bandwidth)
    level = float(np.quantile(near.evaluate(start)[1], 0.98))
    return Composed(affine, attrs.evolve(near, level=level))


def barycentric_projection(coupling: NDArray[np.float64], target: Colours, *, otherwise: Colours) -> Colours:
    """Return the (n, 3) mean target of each source colour; one without mass goes where `otherwise` says."""
    mass = coupling.sum(axis=1, keepdims=True)
    return np.asarray(np.where(mass > 0, coupling @ target / np.maximum(mass, 1e-300), otherwise))
