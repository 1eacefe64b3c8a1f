"""The ASC color decision list: slope, offset, power and saturation.

References:
    Pines & Reisner (2009), ASC Color Decision List transfer functions and interchange syntax, version 1.2;
    Academy S-2014-006, ASC_CDL node.
"""

from __future__ import annotations

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
        graded = np.clip(codes * np.array(self.slope) + np.array(self.offset), 0.0, 1.0) ** np.array(self.power)
        luma = (graded @ _LUMA)[:, None]
        return np.asarray(np.clip(luma + self.saturation * (graded - luma), 0.0, 1.0))


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
