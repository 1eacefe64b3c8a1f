"""Scene-linear light as codes of 0 … 1, so that a lattice table can hold maps of it.

Light has no upper end: 1 is diffuse white, a lamp may be 50. A table does, and its nodes would all lie in highlights if
they were even in light. So light x is coded as log2(1 + 128 x) ÷ 14: codes of 0 … 1 stand for light of 0 … 128, seven
stops above diffuse white, half of them for what lies below it; below 1/128 codes are nearly linear, and 0 stays 0.
Beyond 128 and below 0 codes go on by the same formula, odd about 0. A shift of codes is nearly a gain of light.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Xyz, read_only
from hueferry.colour.curves import Parametric
from hueferry.colour.encoding import MatrixEncoding
from hueferry.colour.spaces import WHITE_D50, adaptation, primaries_to_xyz
from hueferry.errors import InputError
from hueferry.picture import Encoding

STOPS = 14.0
"""Stops that codes of 0 … 1 span, from the toe up."""

TOE = 128.0
"""Reciprocal of the light at which the curve turns from linear to logarithmic."""

WHITE_CODE = float(np.log2(1.0 + TOE) / STOPS)
"""Code of diffuse white, a little above one half."""

MOST_LIGHT = float((2.0**STOPS - 1.0) / TOE)
"""Light of code 1."""

REC_709 = (0.64, 0.33, 0.30, 0.60, 0.15, 0.06, 0.3127, 0.3290)
"""Chromaticities x, y of red, green, blue and white (ITU-R BT.709), taken where a file states none."""


def to_codes(light: NDArray[Any]) -> NDArray[np.float64]:
    """Turn light of any shape into codes."""
    wide = np.asarray(light, dtype=np.float64)
    return np.asarray(np.copysign(np.log2(1.0 + TOE * np.abs(wide)) / STOPS, wide))


def to_light(codes: NDArray[Any]) -> NDArray[np.float64]:
    """Turn codes of any shape into light; the inverse of `to_codes`."""
    wide = np.asarray(codes, dtype=np.float64)
    return np.asarray(np.copysign((np.exp2(STOPS * np.minimum(np.abs(wide), 73.0)) - 1.0) / TOE, wide))


@attrs.frozen(eq=False)
class SceneLinear:
    """Codes of scene-linear light between three primaries.

    Attributes:
        name: for people.
        matrix: (3, 3) light to XYZ relative to the ICC's D50; invertible.
        chromaticities: x, y of red, green, blue and white.
        profile: always None: there is no ICC profile of light without an upper end.
    """

    name: str
    matrix: NDArray[np.float64] = attrs.field(converter=read_only)
    chromaticities: tuple[float, ...] = REC_709
    profile: bytes | None = None

    def to_xyz(self, codes: Codes) -> Xyz:
        """Turn (n, 3) codes into XYZ (D50); Y = 1 is diffuse white."""
        return np.asarray(to_light(codes) @ self.matrix.T)

    def from_xyz(self, xyz: Xyz) -> Codes:
        """Turn (n, 3) XYZ (D50) into codes, not clipped."""
        return to_codes(xyz @ np.linalg.inv(self.matrix).T)

    @property
    def light(self) -> MatrixEncoding:
        """The encoding of the light itself, for files that hold it with an ICC profile."""
        straight = Parametric(1.0)
        return MatrixEncoding(self.name, (straight, straight, straight), self.matrix)


def scene_linear(chromaticities: Sequence[float]) -> SceneLinear:
    """Return the encoding of scene-linear light from x, y of red, green, blue and white.

    Raises:
        InputError: these are not eight numbers that span a gamut.
    """
    values = tuple(float(value) for value in chromaticities)
    wrong = InputError(f"the chromaticities {values} span no gamut; correct them in the file")
    if len(values) != 8 or not np.isfinite(values).all() or max(map(abs, values)) > 4 or abs(values[7]) < 1e-3:
        raise wrong
    red, green, blue, (x, y) = (np.array(values[start : start + 2]) for start in (0, 2, 4, 6))
    span = np.column_stack([red - blue, green - blue])
    if abs(np.linalg.det(span)) < 1e-4 or min(abs(one[1]) for one in (red, green, blue)) < 1e-6:
        raise wrong
    white = np.array([x / y, 1.0, (1 - x - y) / y])
    matrix = adaptation(white, WHITE_D50) @ primaries_to_xyz(red, green, blue, white)
    if not np.isfinite(matrix).all() or abs(np.linalg.det(matrix)) < 1e-6:
        raise wrong
    usual = np.allclose(values, REC_709, atol=5e-4)
    return SceneLinear(f"scene-linear {'Rec. 709' if usual else 'light'}, log2(1 + 128 x) / 14", matrix, values)


def is_scene_linear(encoding: Encoding) -> bool:
    """Whether codes stand for light that goes on beyond diffuse white."""
    return isinstance(encoding, SceneLinear)


def white_code(encoding: Encoding) -> float:
    """Return the code at which what is known of a picture ends: that of diffuse white, which is 1 in most encodings."""
    return WHITE_CODE if is_scene_linear(encoding) else 1.0
