"""The palette: a weighted point cloud of colours."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.arrays import Colours, Weights, read_only
from hueferry.errors import PaletteError


@attrs.frozen(eq=False)
class Palette:
    """Colours, each with the share of the picture it covers.

    Attributes:
        colours: (n, 3) float64 in Oklab (pictures) or optical density (slides); n >= 1, all finite.
        weights: (n,) float64, >= 0, summing to 1 within 1e-9.
        spread: root mean square distance, in the same space, between pixels and the colour that stands for them:
            the quantisation error of the palette; 0 for a palette that was not reduced.
        pixels: how many pixels were counted; 0 if unknown.
    """

    colours: Colours = attrs.field(converter=read_only)
    weights: Weights = attrs.field(converter=read_only)
    spread: float = 0.0
    pixels: int = 0

    @colours.validator
    def _check_colours(self, _: object, value: Colours) -> None:
        if value.ndim != 2 or value.shape[1] != 3 or len(value) == 0:
            raise PaletteError(f"colours must be (n, 3) with n >= 1, not {value.shape}")
        if not np.isfinite(value).all():
            raise PaletteError("colours must be finite; leave out pixels that are NaN or infinite")

    @weights.validator
    def _check_weights(self, _: object, value: Weights) -> None:
        if value.shape != (len(self.colours),):
            raise PaletteError(f"{len(self.colours)} colours need as many weights, not {value.shape}")
        if not np.isfinite(value).all() or (value < 0).any():
            raise PaletteError("weights must be finite and not negative")
        if abs(float(value.sum()) - 1.0) > 1e-9:
            raise PaletteError(f"weights must sum to 1, not {float(value.sum()):.12g}")

    def __len__(self) -> int:
        return len(self.colours)

    @property
    def mean(self) -> Colours:
        """(3,) weighted mean colour."""
        return self.weights @ self.colours

    @property
    def covariance(self) -> Colours:
        """(3, 3) weighted covariance (population form: divided by the whole weight)."""
        centred = self.colours - self.mean
        return (centred * self.weights[:, None]).T @ centred
