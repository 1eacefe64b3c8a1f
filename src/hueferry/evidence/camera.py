"""A camera-like map: what a change of light, camera or rendering does to every colour alike.

Fifteen numbers: three gains and a shoulder in linear light, then in Oklab a tone curve of lightness, a chroma
factor, a hue turn and small cross terms. Each step keeps orientation (increasing curves a channel; then lightness
depends on lightness alone, and a, b are carried by a matrix of positive determinant that depends on lightness
alone), so no member of the family can fold.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Linear, read_only
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb

Parameters = NDArray[np.float64]
Columns = NDArray[np.float64]
Plane = NDArray[np.float64]

NAMES = (
    "gain_red", "gain_green", "gain_blue", "shoulder", "knee", "power", "bend", "lift",
    "chroma", "chroma_slope", "turn", "stretch", "shear", "tone_a", "tone_b",
)  # fmt: skip
"""What each parameter moves; all are 0 for no change."""

SIZE = len(NAMES)

LIMITS: Mapping[str, float] = MappingProxyType(
    {"shoulder": 8.0, "knee": 0.5, "power": 0.7, "bend": 0.2, "lift": 0.15, "chroma": 1.2}
)
"""Largest magnitude of parameters whose curve would stop increasing, or lose its meaning, beyond it."""

BOUNDS = np.array([LIMITS.get(name, 2.0) for name in NAMES])
KNEE = 0.6


@attrs.frozen(eq=False)
class CameraMap:
    """A member of the family.

    Attributes:
        parameters: (15,) in the order of `NAMES`: natural logarithms of the gains; strength of the shoulder and
            logarithm of its knee over 0.6; logarithm of the lightness power, bend and lift of the tone curve in
            Oklab L; logarithm of the chroma factor at L = 0.5 and its slope with L; hue turn in radians; stretch
            and shear of the a, b plane; split tone at middle lightness in Oklab a, b.
    """

    parameters: Parameters = attrs.field(converter=read_only)

    def __call__(self, colours: Colours) -> Colours:
        """Carry (n, 3) Oklab colours over."""
        return render(self.parameters, oklab_to_linear_srgb(np.asarray(colours, dtype=np.float64)))

    def as_dict(self) -> dict[str, float]:
        """Return the parameters by name."""
        return {name: float(value) for name, value in zip(NAMES, self.parameters, strict=True)}


def render(parameters: Parameters, light: Linear) -> Colours:
    """Carry (n, 3) linear sRGB light over to Oklab; `parameters` beyond their bounds count as at the bound.

    Args:
        parameters: (15,), or (k, 15) for k maps at once.
        light: (n, 3).

    Returns:
        (n, 3), or (k, n, 3).
    """
    several = np.atleast_2d(np.clip(parameters, -BOUNDS, BOUNDS))[:, :, None]
    lit = np.ascontiguousarray(light.T) * np.exp(several[:, :3])  # channel by channel, (k, 3, n)
    rolled = _shoulder(lit, several[:, 3:4], several[:, 4:5])
    lightness, a, b = np.moveaxis(linear_srgb_to_oklab(np.swapaxes(rolled, 1, 2)), 2, 0)
    carried = np.swapaxes(np.stack([_tone(several, lightness), *_chroma(several, lightness, a, b)], axis=1), 1, 2)
    return carried if np.ndim(parameters) == 2 else carried[0]


def _shoulder(light: Linear, strength: Columns, knee: Columns) -> Linear:
    """Roll highlights off (strength > 0) or stretch them (< 0); increasing for every strength, identity at 0."""
    start = KNEE * np.exp(knee)
    over = np.maximum(light - start, 0.0)
    down, up = np.maximum(strength, 0.0), np.minimum(strength, 0.0)
    return np.asarray(np.minimum(light, start) + over / (1 + down * over) - up * over * over)


def _tone(parameters: Columns, lightness: Plane) -> Plane:
    """Power, bend and lift of lightness: increasing, with the straight continuation beyond 0 … 1."""
    power, bend, lift = np.exp(parameters[:, 5]), parameters[:, 6], parameters[:, 7]
    raised = np.clip(lightness, 0.0, 1.0) ** power
    curved = raised + 4 * bend * raised * raised * (1 - raised)
    slope_above = (1 - lift) * (1 - 4 * bend) * power
    beyond = np.maximum(lightness - 1, 0.0) * slope_above + np.minimum(lightness, 0.0)
    return np.asarray(lift + (1 - lift) * curved + beyond)


def _chroma(parameters: Columns, lightness: Plane, a: Plane, b: Plane) -> tuple[Plane, Plane]:
    """Scale, turn, stretch and tint the a, b plane; the matrix is a positive factor × rotation × exp(symmetric)."""
    level = np.clip(lightness, 0.0, 1.0)
    factor = np.exp(parameters[:, 8] + parameters[:, 9] * (level - 0.5))
    stretch, shear = parameters[:, 11], parameters[:, 12]
    size = np.hypot(stretch, shear)
    even, odd = np.cosh(size), np.sinh(size) / np.maximum(size, 1e-12) + (size == 0)
    wide_a = (even + odd * stretch) * a + odd * shear * b
    wide_b = odd * shear * a + (even - odd * stretch) * b
    cosine, sine = np.cos(parameters[:, 10]), np.sin(parameters[:, 10])
    tint = 4 * level * (1 - level)
    return (
        factor * (cosine * wide_a - sine * wide_b) + parameters[:, 13] * tint,
        factor * (sine * wide_a + cosine * wide_b) + parameters[:, 14] * tint,
    )
