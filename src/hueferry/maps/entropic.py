"""The entropic map: the gradient of a soft potential, debiased, after the Gaussian map."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights, read_only
from hueferry.maps.compose import Composed
from hueferry.maps.gaussian import fit_gaussian
from hueferry.palettes.palette import Palette
from hueferry.transport.costs import squared_distances
from hueferry.transport.entropic import entropic_potentials, self_potential

BLUR = 0.03
"""Blur σ of the plan in Oklab (ε = 2 σ²)."""

_BLOCK = 512


@attrs.frozen(eq=False)
class SoftMean:
    """The entropic (barycentric) map of a plan at any point.

    T(x) = Σ_j b_j y_j exp((g_j − |x − y_j|²) / ε) / Σ_j b_j exp((g_j − |x − y_j|²) / ε)

    It is the gradient of a convex function, so its Jacobian is symmetric positive semidefinite.

    Attributes:
        targets: (m, 3) y.
        weights: (m,) b.
        potential: (m,) g.
        epsilon: ε.

    References:
        Pooladian & Niles-Weed (2021), Entropic estimation of optimal transport maps.
    """

    targets: Colours = attrs.field(converter=read_only)
    weights: Weights = attrs.field(converter=read_only)
    potential: NDArray[np.float64] = attrs.field(converter=read_only)
    epsilon: float

    def evaluate(self, colours: Colours) -> tuple[Colours, NDArray[np.float64]]:
        """Return T(x), (n, 3), and how far x is from the support, as a soft squared distance (n,)."""
        seen = self.weights > 0
        targets = self.targets[seen].astype(np.float32)
        with np.errstate(divide="ignore"):
            bias = (self.potential[seen] / self.epsilon + np.log(self.weights[seen])).astype(np.float32)
        bias = bias - ((targets**2).sum(axis=1) / self.epsilon).astype(np.float32)
        columns = np.concatenate([targets, np.ones((len(targets), 1), np.float32)], axis=1)
        means, soft = np.empty((len(colours), 3)), np.empty(len(colours))
        for start in range(0, len(colours), _BLOCK):
            part = slice(start, start + _BLOCK)
            x = colours[part].astype(np.float32)
            exponent = x @ (targets.T * np.float32(2 / self.epsilon)) + bias
            peak = exponent.max(axis=1)
            # What is below e^-60 of the peak cannot count in float32, and would turn into slow subnormal numbers.
            np.exp(np.maximum(exponent - peak[:, None], -60), out=exponent)
            sums = exponent @ columns
            means[part] = sums[:, :3] / sums[:, 3:]
            soft[part] = (x.astype(np.float64) ** 2).sum(axis=1) - self.epsilon * (peak + np.log(sums[:, 3]))
        return means, soft


@attrs.frozen(eq=False)
class DebiasedMap:
    """x ↦ x + trust(x) · (T_ab(x) − T_aa(x)): the entropic map less the shrinkage that blur alone would bring.

    Attributes:
        across: the entropic map from the palette to its target.
        within: the entropic map from the palette to itself.
        reach: distance over which trust fades outside the palette, in working-space units.
        level: soft squared distance that the palette's own colours have; trust is full up to it.

    References:
        Feydy et al. (2019), Interpolating between optimal transport and MMD using Sinkhorn divergences: the
        displacement is the gradient of the divergence's potential.
    """

    across: SoftMean
    within: SoftMean
    reach: float
    level: float

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        there, _ = self.across.evaluate(colours)
        here, soft = self.within.evaluate(colours)
        return np.asarray(colours + trust_of(soft - self.level, self.reach)[:, None] * (there - here))

    def trust(self, colours: Colours) -> NDArray[np.float64]:
        """Return how far the palette vouches for (n, 3) colours, 0 … 1."""
        return trust_of(self.within.evaluate(colours)[1] - self.level, self.reach)


def trust_of(soft_squared_distance: NDArray[np.float64], reach: float) -> NDArray[np.float64]:
    """Return 1 on the support, falling to 0 over a few `reach`."""
    return np.asarray(1.0 / (1.0 + np.maximum(soft_squared_distance, 0.0) / (2 * reach) ** 2))


def fit_entropic(source: Palette, target: Palette, *, blur: float = BLUR) -> Composed:
    """Return the Gaussian map followed by the debiased entropic map of what it leaves.

    Away from the palette the Gaussian part alone is followed.

    Args:
        source: palette to carry over.
        target: palette to reach.
        blur: σ of the plan, in working-space units; ε = 2 σ². Smaller follows the palettes closer and is less smooth.

    Raises:
        NotConverged: the potentials could not be found.
    """
    affine = fit_gaussian(source, target)
    start, epsilon = affine(source.colours), 2 * blur**2
    cost = squared_distances(start, target.colours)
    found = entropic_potentials(source.weights, target.weights, cost, epsilon=epsilon)
    own = self_potential(source.weights, squared_distances(start, start), epsilon=epsilon)
    across = SoftMean(target.colours, target.weights, found.g, epsilon)
    within = SoftMean(start, source.weights, own, epsilon)
    level = float(np.quantile(within.evaluate(start)[1], 0.98))
    return Composed(affine, DebiasedMap(across, within, reach=2 * blur, level=level))
