"""Colour differences between CIELAB colours."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Lab

Differences = NDArray[np.float64]


def delta_e_76(first: Lab, second: Lab) -> Differences:
    """Return ΔE*ab, the Euclidean distance in CIELAB (CIE 1976), for (…, 3) arrays that broadcast."""
    return np.asarray(np.linalg.norm(np.asarray(first) - np.asarray(second), axis=-1))


def delta_e_2000(first: Lab, second: Lab) -> Differences:
    """Return ΔE00 with kL = kC = kH = 1, for (…, 3) arrays that broadcast.

    References:
        Sharma, Wu & Dalal (2005), The CIEDE2000 color-difference formula, equations 2-22.
    """
    l1, a1, b1 = np.moveaxis(np.asarray(first, dtype=np.float64), -1, 0)
    l2, a2, b2 = np.moveaxis(np.asarray(second, dtype=np.float64), -1, 0)
    mean_chroma7 = ((np.hypot(a1, b1) + np.hypot(a2, b2)) / 2) ** 7
    stretch = 1.5 - 0.5 * np.sqrt(mean_chroma7 / (mean_chroma7 + 25.0**7))
    c1, c2 = np.hypot(stretch * a1, b1), np.hypot(stretch * a2, b2)
    h1, h2 = _hue(stretch * a1, b1), _hue(stretch * a2, b2)
    coloured = c1 * c2 > 0

    turn = np.where(coloured, (h2 - h1 + 180) % 360 - 180, 0.0)
    turn = np.where(coloured & (h2 - h1 == 180), 180.0, turn)  # the paper keeps +180 where both turns are as long
    total = h1 + h2
    mean_hue = np.where(np.abs(h1 - h2) <= 180, total / 2, np.where(total < 360, total / 2 + 180, total / 2 - 180))
    mean_hue = np.where(coloured, mean_hue, total)

    lightness, chroma = (l1 + l2) / 2, (c1 + c2) / 2
    lightness_step = (l2 - l1) / (1 + 0.015 * (lightness - 50) ** 2 / np.sqrt(20 + (lightness - 50) ** 2))
    chroma_step = (c2 - c1) / (1 + 0.045 * chroma)
    hue_step = 2 * np.sqrt(c1 * c2) * np.sin(np.radians(turn / 2)) / (1 + 0.015 * chroma * _hue_weight(mean_hue))
    rotation = -np.sin(np.radians(60 * np.exp(-(((mean_hue - 275) / 25) ** 2))))
    rotation = rotation * 2 * np.sqrt(chroma**7 / (chroma**7 + 25.0**7))
    squared = lightness_step**2 + chroma_step**2 + hue_step**2 + rotation * chroma_step * hue_step
    return np.asarray(np.sqrt(np.maximum(squared, 0.0)))


def _hue(a: Differences, b: Differences) -> Differences:
    return np.asarray(np.degrees(np.arctan2(b, a)) % 360)


def _hue_weight(hue: Differences) -> Differences:
    return np.asarray(
        1
        - 0.17 * np.cos(np.radians(hue - 30))
        + 0.24 * np.cos(np.radians(2 * hue))
        + 0.32 * np.cos(np.radians(3 * hue + 6))
        - 0.20 * np.cos(np.radians(4 * hue - 63))
    )
