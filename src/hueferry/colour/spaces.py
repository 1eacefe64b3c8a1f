"""CIE XYZ, CIELAB and Oklab.

Oklab is reached by one route only, linear sRGB (Ottosson 2020, "A perceptual color space for image processing",
the matrices given there for linear sRGB): the two published routes differ by 1e-4 at white, and on this one
every neutral has a = b = 0 to rounding. XYZ enters through the exact inverse of the sRGB primaries' matrix.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Lab, Linear, Xyz

Matrix = NDArray[np.float64]

WHITE_D50: Matrix = np.array([0.9642, 1.0, 0.8249])
"""The ICC profile connection space's white (ICC.1:2022, clause 7.2.16)."""

WHITE_D65: Matrix = np.array([0.3127 / 0.3290, 1.0, (1 - 0.3127 - 0.3290) / 0.3290])
"""D65 from the chromaticity x = 0.3127, y = 0.3290 (IEC 61966-2-1)."""

BRADFORD: Matrix = np.array([[0.8951, 0.2664, -0.1614], [-0.7502, 1.7135, 0.0367], [0.0389, -0.0685, 1.0296]])
"""Cone matrix of the linear Bradford adaptation (Lam 1985; ICC.1:2022, annex E)."""


def adaptation(source_white: Matrix, target_white: Matrix) -> Matrix:
    """Return the (3, 3) linear Bradford matrix that carries XYZ from one white point to another."""
    gains = (BRADFORD @ target_white) / (BRADFORD @ source_white)
    return np.asarray(np.linalg.solve(BRADFORD, gains[:, None] * BRADFORD))


def primaries_to_xyz(red: Matrix, green: Matrix, blue: Matrix, white: Matrix) -> Matrix:
    """Return the (3, 3) matrix from linear RGB to XYZ, from chromaticities (x, y) and the white's XYZ."""
    columns = np.stack([np.array([x / y, 1.0, (1 - x - y) / y]) for x, y in (red, green, blue)], axis=1)
    return np.asarray(columns * np.linalg.solve(columns, white))


SRGB_TO_XYZ_D65: Matrix = primaries_to_xyz(
    np.array([0.64, 0.33]), np.array([0.30, 0.60]), np.array([0.15, 0.06]), WHITE_D65
)
SRGB_TO_XYZ_D50: Matrix = adaptation(WHITE_D65, WHITE_D50) @ SRGB_TO_XYZ_D65

SRGB_TO_CONES: Matrix = np.array(
    [
        [0.4122214708, 0.5363325363, 0.0514459929],
        [0.2119034982, 0.6806995451, 0.1073969566],
        [0.0883024619, 0.2817188376, 0.6299787005],
    ]
)
CONES_TO_OKLAB: Matrix = np.array(
    [
        [0.2104542553, 0.7936177850, -0.0040720468],
        [1.9779984951, -2.4285922050, 0.4505937099],
        [0.0259040371, 0.7827717662, -0.8086757660],
    ]
)
_OKLAB_TO_CONES: Matrix = np.asarray(np.linalg.inv(CONES_TO_OKLAB), dtype=np.float64)
_CONES_TO_SRGB: Matrix = np.asarray(np.linalg.inv(SRGB_TO_CONES), dtype=np.float64)
_XYZ_D50_TO_SRGB: Matrix = np.asarray(np.linalg.inv(SRGB_TO_XYZ_D50), dtype=np.float64)


def times(matrix: Matrix, colours: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return (…, 3) `matrix` · colour, laid out channel by channel: five times as fast as row by row."""
    if colours.ndim == 1:
        return np.asarray(matrix @ colours)
    return np.asarray(np.swapaxes(matrix @ np.swapaxes(colours, -1, -2), -1, -2))


def linear_srgb_to_oklab(linear: Linear) -> Colours:
    """Turn (…, 3) linear sRGB into Oklab (Ottosson 2020)."""
    return times(CONES_TO_OKLAB, np.cbrt(times(SRGB_TO_CONES, linear)))


def oklab_to_linear_srgb(colours: Colours) -> Linear:
    """Turn (…, 3) Oklab into linear sRGB, not clipped (Ottosson 2020)."""
    roots = times(_OKLAB_TO_CONES, colours)
    return times(_CONES_TO_SRGB, roots * roots * roots)  # NumPy's ** 3 takes twenty times as long


def xyz_to_oklab(xyz: Xyz) -> Colours:
    """Turn (…, 3) XYZ relative to the ICC's D50 into Oklab."""
    return linear_srgb_to_oklab(times(_XYZ_D50_TO_SRGB, xyz))


def oklab_to_xyz(colours: Colours) -> Xyz:
    """Turn (…, 3) Oklab into XYZ relative to the ICC's D50."""
    return times(SRGB_TO_XYZ_D50, oklab_to_linear_srgb(colours))


def xyz_to_lab(xyz: Xyz, white: Matrix = WHITE_D50) -> Lab:
    """Turn (…, 3) XYZ into CIELAB relative to `white` (CIE 15; ISO/CIE 11664-4)."""
    ratio = np.asarray(xyz) / white
    knee = (6 / 29) ** 3
    f = np.where(ratio > knee, np.cbrt(ratio), ratio / (3 * (6 / 29) ** 2) + 4 / 29)
    return np.stack([116 * f[..., 1] - 16, 500 * (f[..., 0] - f[..., 1]), 200 * (f[..., 1] - f[..., 2])], axis=-1)


def lab_to_xyz(lab: Lab, white: Matrix = WHITE_D50) -> Xyz:
    """Turn (…, 3) CIELAB relative to `white` into XYZ (CIE 15; ISO/CIE 11664-4)."""
    fy = (lab[..., 0] + 16) / 116
    f = np.stack([fy + lab[..., 1] / 500, fy, fy - lab[..., 2] / 200], axis=-1)
    return np.asarray(np.where(f > 6 / 29, f**3, 3 * (6 / 29) ** 2 * (f - 4 / 29)) * white)


def oklab_to_lab(colours: Colours) -> Lab:
    """Turn (…, 3) Oklab into CIELAB relative to the ICC's D50."""
    return xyz_to_lab(oklab_to_xyz(colours))


def lab_to_oklab(lab: Lab) -> Colours:
    """Turn (…, 3) CIELAB relative to the ICC's D50 into Oklab."""
    return xyz_to_oklab(lab_to_xyz(lab))
