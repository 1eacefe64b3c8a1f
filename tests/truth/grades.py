"""Known changes of camera and light, the `G` of the benchmark."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear

Pixels8 = NDArray[np.uint8]


@attrs.frozen(eq=False)
class Grade:
    """A change in scene-linear light, then a rendering.

    Attributes:
        stops: exposure.
        gains: (3,) white balance gains, geometric mean 1.
        knee: linear light above which highlights are rolled off, per channel.
        power: exponent of Oklab lightness.
        chroma: factor of Oklab chroma.
        turn: hue turn in radians.
    """

    stops: float
    gains: NDArray[np.float64]
    knee: float
    power: float
    chroma: float
    turn: float

    def __call__(self, pixels: Pixels8) -> Pixels8:
        """Render (…, 3) sRGB pixels anew, clipped to sRGB and rounded to 8 bit."""
        light = srgb_to_linear(pixels / 255.0) * (2.0**self.stops * self.gains)
        over = np.maximum(light - self.knee, 0.0) / (1 - self.knee)
        light = np.where(light > self.knee, self.knee + (1 - self.knee) * (1 - np.exp(-over)), light)
        lab = linear_srgb_to_oklab(light)
        cosine, sine = np.cos(self.turn), np.sin(self.turn)
        a, b = lab[..., 1] * self.chroma, lab[..., 2] * self.chroma
        lightness = np.maximum(lab[..., 0], 0.0) ** self.power
        rendered = np.stack([lightness, cosine * a - sine * b, sine * a + cosine * b], axis=-1)
        codes = linear_to_srgb(oklab_to_linear_srgb(rendered))
        return np.asarray(np.rint(np.clip(codes, 0, 1) * 255), dtype=np.uint8)


def draw_grade(rng: np.random.Generator) -> Grade:
    """Draw a grade: ±0.7 EV, gains σ 0.12, knee 0.6 … 0.95, power 0.8 … 1.2, chroma 0.65 … 1.35, turn σ 0.08 rad."""
    log_gains = rng.normal(0.0, 0.12, 3)
    return Grade(
        stops=rng.uniform(-0.7, 0.7),
        gains=np.exp(log_gains - log_gains.mean()),
        knee=rng.uniform(0.6, 0.95),
        power=rng.uniform(0.8, 1.2),
        chroma=rng.uniform(0.65, 1.35),
        turn=rng.normal(0.0, 0.08),
    )
