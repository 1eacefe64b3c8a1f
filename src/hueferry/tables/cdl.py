"""The ASC color decision list: slope, offset, power and saturation.

References:
    Pines & Reisner (2009), ASC Color Decision List transfer functions and interchange syntax, version 1.2;
    Academy S-2014-006, ASC_CDL node.
"""

from __future__ import annotations

from enum import StrEnum

import attrs
import numpy as np

from hueferry.arrays import Codes
from hueferry.errors import InputError

_LUMA = np.array([0.2126, 0.7152, 0.0722])
Triple = tuple[float, float, float]


@attrs.frozen
class DecisionList:
    """Ten numbers, on codes of 0 … 1.

    Attributes:
        slope: a channel, >= 0.
        offset: a channel.
        power: a channel, > 0.
        saturation: >= 0.
    """

    slope: Triple = (1.0, 1.0, 1.0)
    offset: Triple = (0.0, 0.0, 0.0)
    power: Triple = (1.0, 1.0, 1.0)
    saturation: float = 1.0

    def __attrs_post_init__(self) -> None:
        if not np.isfinite([*self.slope, *self.offset, *self.power, self.saturation]).all():
            raise InputError("a decision list holds finite numbers only")
        if min(self.slope) < 0 or min(self.power) <= 0 or self.saturation < 0:
            raise InputError("in a decision list slope and saturation are 0 or more, and power is more than 0")

    def __call__(self, codes: Codes) -> Codes:
        """Return (n, 3) codes through the list, clamped to 0 … 1 before the power and at the end."""
        return Grade(self)(codes)

    @property
    def invertible(self) -> bool:
        """Whether no channel and no colour is lost: slope and saturation are more than 0."""
        return min(self.slope) > 0 and self.saturation > 0


class Style(StrEnum):
    """Which way a list is run, and whether results are clamped to 0 … 1."""

    FORWARD = "Fwd"
    REVERSE = "Rev"
    FORWARD_NO_CLAMP = "FwdNoClamp"
    REVERSE_NO_CLAMP = "RevNoClamp"


@attrs.frozen
class Grade:
    """A decision list run in one of the four styles.

    Attributes:
        numbers: the list.
        style: how it is run; a list that is run backwards must be invertible.
    """

    numbers: DecisionList
    style: Style = Style.FORWARD

    def __attrs_post_init__(self) -> None:
        if self._is_reverse and not self.numbers.invertible:
            raise InputError("a decision list with a slope or saturation of 0 cannot be run backwards")

    @property
    def separable(self) -> bool:
        """Whether each channel of the result depends on its own channel alone."""
        return self.numbers.saturation == 1.0

    @property
    def _is_reverse(self) -> bool:
        return self.style in (Style.REVERSE, Style.REVERSE_NO_CLAMP)

    def __call__(self, codes: Codes) -> Codes:
        """Carry (n, 3) codes over."""
        return self._reverse(codes) if self._is_reverse else self._forward(codes)

    def _forward(self, codes: Codes) -> Codes:
        list_ = self.numbers
        sloped = self._held(codes * np.array(list_.slope) + np.array(list_.offset))
        graded = _risen(sloped, np.array(list_.power))
        return self._held(_saturated(graded, list_.saturation))

    def _reverse(self, codes: Codes) -> Codes:
        list_ = self.numbers
        plain = self._held(_saturated(self._held(codes), 1 / list_.saturation))
        return self._held((_risen(plain, 1 / np.array(list_.power)) - np.array(list_.offset)) / np.array(list_.slope))

    def _held(self, codes: Codes) -> Codes:
        clamps = self.style in (Style.FORWARD, Style.REVERSE)
        return np.clip(codes, 0.0, 1.0) if clamps else np.asarray(codes)


def _saturated(codes: Codes, saturation: float) -> Codes:
    if saturation == 1.0:
        return codes
    luma = (codes @ _LUMA)[:, None]
    return np.asarray(luma + saturation * (codes - luma))


def _risen(codes: Codes, power: Codes) -> Codes:
    """Raise to a power; what is negative stays as it is."""
    return np.where(codes < 0, codes, np.maximum(codes, 0.0) ** power)


def cc_text(grade: DecisionList, *, identity: str = "hueferry") -> str:
    """Return a decision list as the text of a `.cc` file.

    Args:
        grade: the list.
        identity: what the correction is called; letters, digits, dots, dashes.
    """
    if not identity or not all(character.isalnum() or character in ".-_" for character in identity):
        raise InputError(f"a correction cannot be called {identity!r}; use letters, digits, dots and dashes")

    def spaced(values: Triple) -> str:
        return " ".join(f"{value:.9g}" for value in values)

    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        f'<ColorCorrection id="{identity}">\n'
        f"  <SOPNode>\n    <Slope>{spaced(grade.slope)}</Slope>\n    <Offset>{spaced(grade.offset)}</Offset>\n"
        f"    <Power>{spaced(grade.power)}</Power>\n  </SOPNode>\n"
        f"  <SatNode>\n    <Saturation>{grade.saturation:.9g}</Saturation>\n  </SatNode>\n</ColorCorrection>\n"
    )
