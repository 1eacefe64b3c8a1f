"""What process nodes with parameters do to colours: powers and logarithms, each channel with its own numbers.

Codes are normalised: 1 is the top of an integer code range. Parameters never depend on bit depths.

References:
    Academy S-2014-006, Common LUT Format, version 3.0, nodes Exponent and Log; SMPTE ST 2136-1.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.tables.operations import Operation

Line = NDArray[np.float64]
LineFunction = Callable[[Line], Line]

_SMALLEST = 1.175494e-38
"""FLT_MIN of the standard: logarithms are taken of nothing less."""

_NEAR_ONE = 1.0 + 1e-6
_NEAR_ZERO = 1e-6
"""Exponents and offsets of curves with a linear part keep this far from where their formulas divide by zero."""


@attrs.frozen
class PerChannel:
    """A function a channel.

    Attributes:
        functions: for red, green and blue; (n,) to (n,).
    """

    functions: tuple[LineFunction, LineFunction, LineFunction]
    separable: bool = True

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) colours over."""
        return np.stack([function(codes[:, i]) for i, function in enumerate(self.functions)], axis=1)


@attrs.frozen
class Power:
    """A pure power law.

    Attributes:
        exponent: > 0.
        below: what becomes of negative values: 0 ("clamp"), their mirror image ("mirror") or themselves ("pass").
    """

    exponent: float
    below: str

    def __call__(self, values: Line) -> Line:
        """Carry (n,) values over."""
        risen = np.abs(values) ** self.exponent
        negative = {"clamp": np.zeros_like(values), "mirror": -risen, "pass": values}[self.below]
        return np.where(values >= 0, risen, negative)


def _above_one(exponent: float) -> float:
    return max(exponent, _NEAR_ONE)


def _above_zero(offset: float) -> float:
    return max(offset, _NEAR_ZERO)


@attrs.frozen
class Joined:
    """A power law with a straight part near black, such as those of IEC 61966-2-1 and Rec. ITU-R BT.709.

    Attributes:
        exponent: 1 … 10.
        offset: 0 … 0.9.
        forward: the power itself, else its inverse.
        mirrored: negative values give the mirror image, else they follow the straight part.
    """

    exponent: float = attrs.field(converter=_above_one)
    offset: float = attrs.field(converter=_above_zero)
    forward: bool
    mirrored: bool

    def __call__(self, values: Line) -> Line:
        """Carry (n,) values over."""
        curve = self._rise if self.forward else self._fall
        if not self.mirrored:
            return curve(values)
        return np.asarray(np.sign(values) * curve(np.abs(values)))

    @property
    def _knee(self) -> tuple[float, float]:
        """Where straight part and power meet: value and result of the forward curve."""
        g, k = self.exponent, self.offset
        return k / (g - 1), (k * g / ((g - 1) * (1 + k))) ** g

    def _rise(self, x: Line) -> Line:
        x_break, y_break = self._knee
        risen = ((np.maximum(x, x_break) + self.offset) / (1 + self.offset)) ** self.exponent
        return np.where(x >= x_break, risen, x * (y_break / x_break))

    def _fall(self, y: Line) -> Line:
        x_break, y_break = self._knee
        risen = (1 + self.offset) * np.maximum(y, y_break) ** (1 / self.exponent) - self.offset
        return np.where(y >= y_break, risen, y * (x_break / y_break))


EXPONENT_STYLES: Mapping[str, Callable[[float, float], LineFunction]] = MappingProxyType(
    {
        "basicFwd": lambda g, _: Power(g, "clamp"),
        "basicRev": lambda g, _: Power(1 / g, "clamp"),
        "basicMirrorFwd": lambda g, _: Power(g, "mirror"),
        "basicMirrorRev": lambda g, _: Power(1 / g, "mirror"),
        "basicPassThruFwd": lambda g, _: Power(g, "pass"),
        "basicPassThruRev": lambda g, _: Power(1 / g, "pass"),
        "monCurveFwd": lambda g, k: Joined(g, k, True, False),
        "monCurveRev": lambda g, k: Joined(g, k, False, False),
        "monCurveMirrorFwd": lambda g, k: Joined(g, k, True, True),
        "monCurveMirrorRev": lambda g, k: Joined(g, k, False, True),
    }
)


@attrs.frozen(kw_only=True)
class LogCurve:
    """A logarithm with gains and offsets on either side and, for cameras, a straight part below a break.

    Attributes:
        base: > 0, not 1.
        log_slope: gain on the logarithmic side, not 0.
        log_offset: offset there.
        lin_slope: gain on the linear side, not 0.
        lin_offset: offset there.
        lin_break: where the straight part ends, on the linear side; None for no straight part.
        straight_slope: slope of the straight part; None for that of the logarithm at the break.
    """

    base: float = 2.0
    log_slope: float = 1.0
    log_offset: float = 0.0
    lin_slope: float = 1.0
    lin_offset: float = 0.0
    lin_break: float | None = None
    straight_slope: float | None = None

    def to_log(self, x: Line) -> Line:
        """Return what (n,) linear values become."""
        curved = self._log(x)
        if self.lin_break is None:
            return curved
        slope, offset = self._straight
        return np.where(x <= self.lin_break, slope * x + offset, curved)

    def to_linear(self, y: Line) -> Line:
        """Return what (n,) logarithmic values become."""
        with np.errstate(over="ignore", under="ignore"):
            curved = (self.base ** ((y - self.log_offset) / self.log_slope) - self.lin_offset) / self.lin_slope
        if self.lin_break is None:
            return np.asarray(curved)
        slope, offset = self._straight
        return np.where(y <= self._log_break, (y - offset) / slope, curved)

    def _log(self, x: Line) -> Line:
        inner = np.maximum(self.lin_slope * x + self.lin_offset, _SMALLEST)
        return np.asarray(self.log_slope * np.log(inner) / np.log(self.base) + self.log_offset)

    @property
    def _log_break(self) -> float:
        return float(self._log(np.array([self.lin_break]))[0])

    @property
    def _straight(self) -> tuple[float, float]:
        """Slope and offset of the straight part."""
        at = 0.0 if self.lin_break is None else self.lin_break
        slope = self.straight_slope
        if slope is None:
            inner = max(self.lin_slope * at + self.lin_offset, _SMALLEST)
            slope = float(self.log_slope * self.lin_slope / (inner * np.log(self.base)))
        return slope, self._log_break - slope * at


LOG_STYLES: Mapping[str, Callable[[LogCurve], LineFunction]] = MappingProxyType(
    {
        "log10": lambda _: LogCurve(base=10.0).to_log,
        "antiLog10": lambda _: LogCurve(base=10.0).to_linear,
        "log2": lambda _: LogCurve(base=2.0).to_log,
        "antiLog2": lambda _: LogCurve(base=2.0).to_linear,
        "linToLog": lambda curve: attrs.evolve(curve, lin_break=None).to_log,
        "logToLin": lambda curve: attrs.evolve(curve, lin_break=None).to_linear,
        "cameraLinToLog": lambda curve: curve.to_log,
        "cameraLogToLin": lambda curve: curve.to_linear,
    }
)
"""The functions of a `Log` node; pure logarithms have no parameters."""


def same_for_all(function: LineFunction) -> Operation:
    """Return the operation that does the same to every channel."""
    return PerChannel((function, function, function))
