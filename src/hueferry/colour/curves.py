"""Tone curves of ICC profiles: parametric and sampled.

Both are extended as odd functions below zero, and above one along the curve's own formula or its last slope, so that
values beyond the code range survive a round trip.
"""

from __future__ import annotations

from typing import Any, Protocol

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.errors import InputError

Values = NDArray[np.float64]


class Curve(Protocol):
    """Code values to linear light and back, one channel, any shape."""

    def decode(self, codes: NDArray[Any]) -> Values:
        """Turn codes (0 … 1) into linear light."""
        ...

    def encode(self, linear: NDArray[Any]) -> Values:
        """Turn linear light into codes; the inverse of `decode`."""
        ...


@attrs.frozen
class Parametric:
    """The ICC's parametric curve of type 4, which holds the others.

    decode(x) = (a x + b) ** gamma + e for x >= d, and c x + f below (ICC.1:2022, clause 10.18). There is no light below
    none: where offsets e or f are negative, small codes stand for 0.
    """

    gamma: float
    a: float = 1.0
    b: float = 0.0
    c: float = 0.0
    d: float = 0.0
    e: float = 0.0
    f: float = 0.0

    def __attrs_post_init__(self) -> None:
        values = attrs.astuple(self)
        if not all(np.isfinite(values)) or self.gamma <= 0 or self.a <= 0 or self.c < 0:
            raise InputError(f"a tone curve must rise; its parameters are {values}")

    def decode(self, codes: NDArray[Any]) -> Values:
        """Turn codes (0 … 1) into linear light."""
        magnitude = np.abs(np.asarray(codes, dtype=np.float64))
        linear = np.asarray(magnitude * self.a + self.b)
        np.maximum(linear, 0.0, out=linear)
        np.power(linear, self.gamma, out=linear)
        linear += self.e
        if self.d > 0:
            np.copyto(linear, self.c * magnitude + self.f, where=magnitude < self.d)
        np.maximum(linear, 0.0, out=linear)
        return np.asarray(np.copysign(linear, codes))

    def encode(self, linear: NDArray[Any]) -> Values:
        """Turn linear light into codes; light between the two pieces of a curve with a jump goes to the joint."""
        magnitude = np.abs(np.asarray(linear, dtype=np.float64))
        codes = np.asarray(np.maximum(magnitude - self.e, 0.0))
        np.power(codes, 1 / self.gamma, out=codes)
        codes -= self.b
        codes /= self.a
        if self.d > 0:
            joint = (self.a * self.d + self.b) ** self.gamma + self.e
            below = (magnitude - self.f) / self.c if self.c > 0 else np.zeros_like(magnitude)
            codes = np.where(magnitude >= joint, codes, np.clip(below, 0.0, self.d))
        return np.asarray(np.copysign(np.maximum(codes, 0.0), linear))


SRGB_CURVE = Parametric(2.4, 1 / 1.055, 0.055 / 1.055, 1 / 12.92, 0.04045)
"""IEC 61966-2-1."""


def _risen(samples: Values) -> Values:
    return np.asarray(np.maximum.accumulate(np.asarray(samples, dtype=np.float64)))


@attrs.frozen(eq=False)
class Sampled:
    """A curve given by samples at equal steps of the code, read by linear interpolation (ICC.1:2022, clause 10.6).

    Attributes:
        samples: (k,) linear light, k >= 2; made to rise, so that it can be inverted.
    """

    samples: Values = attrs.field(converter=_risen)

    def __attrs_post_init__(self) -> None:
        if self.samples.ndim != 1 or len(self.samples) < 2 or not np.isfinite(self.samples).all():
            raise InputError("a sampled tone curve needs two samples at least, all finite")
        if self.samples[-1] <= self.samples[0]:
            raise InputError("a sampled tone curve must rise")

    def decode(self, codes: NDArray[Any]) -> Values:
        """Turn codes (0 … 1) into linear light."""
        magnitude = np.abs(np.asarray(codes, dtype=np.float64))
        steps = np.linspace(0.0, 1.0, len(self.samples))
        linear = np.interp(magnitude, steps, self.samples)
        linear = linear + np.maximum(magnitude - 1.0, 0.0) * self._last_slope()
        return np.asarray(np.copysign(linear, codes))

    def encode(self, linear: NDArray[Any]) -> Values:
        """Turn linear light into codes; on a flat piece, the first code."""
        magnitude = np.abs(np.asarray(linear, dtype=np.float64))
        rising = np.concatenate([[True], np.diff(self.samples) > 0])
        steps = np.linspace(0.0, 1.0, len(self.samples))[rising]
        codes = np.interp(magnitude, self.samples[rising], steps)
        codes = codes + np.maximum(magnitude - self.samples[-1], 0.0) / self._last_slope()
        return np.asarray(np.copysign(codes, linear))

    def _last_slope(self) -> float:
        rising = np.flatnonzero(np.diff(self.samples) > 0)[-1]
        return float((self.samples[rising + 1] - self.samples[rising]) * (len(self.samples) - 1))
