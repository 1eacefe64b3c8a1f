"""A palette in CIELAB, where costs are quoted."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Lab, Weights
from hueferry.colour.spaces import oklab_to_lab
from hueferry.measure.normals import Normal
from hueferry.palettes.palette import Palette

_STEP = 1e-4  # Oklab; far above rounding, far below any curvature


@attrs.frozen(eq=False)
class LabCloud:
    """Weighted colours in CIELAB relative to the ICC's D50.

    Attributes:
        colours: (n, 3) L*, a*, b*.
        weights: (n,) shares, > 0, summing to 1.
        spread: root mean square ΔE*ab between pixels and the colours that stand for them, to first order and for the
            direction in which CIELAB stretches Oklab most: an upper estimate.
    """

    colours: Lab
    weights: Weights
    spread: float

    @classmethod
    def of(cls, palette: Palette) -> LabCloud:
        """Carry an Oklab palette over; colours of no weight are left out."""
        kept = palette.weights > 0
        colours, weights = palette.colours[kept], palette.weights[kept] / palette.weights[kept].sum()
        spread = 0.0
        if palette.spread > 0:
            stretch = np.linalg.svd(_jacobian(colours), compute_uv=False)[:, 0]
            spread = palette.spread * float(np.sqrt(weights @ stretch**2))
        return cls(oklab_to_lab(colours), weights, spread)

    @property
    def mean(self) -> Lab:
        """(3,) mean colour."""
        return self.weights @ self.colours

    @property
    def normal(self) -> Normal:
        """The normal distribution with the same mean and covariance."""
        centred = self.colours - self.mean
        return Normal(self.mean, (centred * self.weights[:, None]).T @ centred)


def _jacobian(colours: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return (n, 3, 3) how CIELAB changes with Oklab, [colour, Lab channel, Oklab channel]."""
    steps = np.eye(3) * _STEP
    return np.stack([(oklab_to_lab(colours + s) - oklab_to_lab(colours - s)) / (2 * _STEP) for s in steps], axis=2)
