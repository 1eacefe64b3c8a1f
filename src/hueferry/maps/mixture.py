"""The mixture map: every colour follows the normals it belongs to."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.maps.compose import Composed
from hueferry.maps.gaussian import fit_gaussian
from hueferry.palettes.palette import Palette
from hueferry.transport.mixture import Mixture, component_maps, fit_mixture_model, solve_mixture

COMPONENTS = 16
FLOOR = 5e-5
"""Variance added to every component, Oklab units squared: that of a cell of a fine lattice."""


@attrs.frozen(eq=False)
class MixtureMap:
    """x ↦ the mean, over components by their share at x and over targets by the plan, of the affine maps between them.

    Attributes:
        source: the mixture that decides what x belongs to.
        matrices: (k, 3, 3) mean affine map of each component under the plan.
        offsets: (k, 3).

    References:
        Delon & Desolneux (2020), section 6.3 (T_mean).
    """

    source: Mixture
    matrices: NDArray[np.float64] = attrs.field(converter=read_only)
    offsets: NDArray[np.float64] = attrs.field(converter=read_only)

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) colours over."""
        shares = self.source.memberships(colours)
        images = np.einsum("kij,nj->nki", self.matrices, colours) + self.offsets
        moved = np.einsum("nk,nki->ni", shares, images) - colours
        return np.asarray(colours + self.trust(colours)[:, None] * moved)

    def trust(self, colours: Colours) -> NDArray[np.float64]:
        """Return how far the nearest normal vouches for (n, 3) colours: 1 within 4 deviations, then falling to 0."""
        squared = np.stack(
            [
                ((np.linalg.solve(np.linalg.cholesky(c), (colours - m).T)) ** 2).sum(axis=0)
                for m, c in zip(self.source.means, self.source.covariances, strict=True)
            ]
        ).min(axis=0)
        return np.asarray(1.0 / (1.0 + np.maximum(squared - 16.0, 0.0) / 16.0))


def fit_mixture(source: Palette, target: Palette, *, seed: int = 0, components: int = COMPONENTS) -> Composed:
    """Return the Gaussian map followed by the mixture map of what it leaves.

    Args:
        source: palette to carry over.
        target: palette to reach.
        seed: of the first fit, to the source.
        components: normals in either mixture, at most.
    """
    affine = fit_gaussian(source, target)
    start = affine(source.colours)
    first = fit_mixture_model(start, source.weights, components=components, seed=seed, floor=FLOOR)
    # Both go on from the same start, so that equal palettes have equal mixtures.
    ours = fit_mixture_model(start, source.weights, components=components, start=first, floor=FLOOR)
    theirs = fit_mixture_model(target.colours, target.weights, components=components, start=first, floor=FLOOR)
    plan = solve_mixture(ours, theirs).coupling
    conditional = plan / np.maximum(plan.sum(axis=1, keepdims=True), 1e-300)
    matrices, offsets = component_maps(ours, theirs)
    return Composed(
        affine,
        MixtureMap(
            ours,
            np.einsum("kl,klij->kij", conditional, matrices),
            np.einsum("kl,kli->ki", conditional, offsets),
        ),
    )
