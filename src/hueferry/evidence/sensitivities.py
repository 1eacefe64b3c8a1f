"""How a camera map's results move with its parameters: the exact derivative of `render`, stage by stage."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Linear
from hueferry.colour.spaces import CONES_TO_OKLAB, SRGB_TO_CONES
from hueferry.evidence.camera import BOUNDS, KNEE, SIZE, Parameters

Planes = NDArray[np.float64]
Line = NDArray[np.float64]

_DARKEST = 1e-4
"""Cube root of cone light below which its slope, infinite at black, is taken as that here."""


def sensitivities(parameters: Parameters, light: Linear) -> tuple[Colours, Planes]:
    """Return `render(parameters, light)` and its derivative to the parameters.

    Args:
        parameters: (15,); those beyond their bounds count as at the bound, and move nothing.
        light: (n, 3) linear sRGB.

    Returns:
        (n, 3) Oklab colours, and (15, 3, n): parameter, channel, colour.
    """
    held = np.clip(parameters, -BOUNDS, BOUNDS)
    found = np.zeros((SIZE, 3, len(light)))
    oklab, before = _through_light(held, np.ascontiguousarray(light.T))
    tone = _tone(held, oklab[0], found)
    (a, b), matrix, along = _chroma(held, oklab, found)
    for row, (lightness, first, second) in enumerate(before):
        found[row, 0] = tone[1] * lightness
        found[row, 1] = matrix[0][0] * first + matrix[0][1] * second + along[0] * lightness
        found[row, 2] = matrix[1][0] * first + matrix[1][1] * second + along[1] * lightness
    found[held != parameters] = 0.0
    return np.stack([tone[0], a, b], axis=1), found


def _through_light(parameters: Parameters, light: Planes) -> tuple[Planes, list[Planes]]:
    """Gains and shoulder: (3, n) Oklab, and its (3, n) derivatives to gains, shoulder and knee."""
    strength, start = float(parameters[3]), KNEE * np.exp(parameters[4])
    lit = light * np.exp(parameters[:3, None])
    over = np.maximum(lit - start, 0.0)
    share = 1 / (1 + max(strength, 0.0) * over)
    rolled = np.minimum(lit, start) + over * share - min(strength, 0.0) * over * over
    slope = share * share - 2 * min(strength, 0.0) * over
    roots = np.cbrt(SRGB_TO_CONES @ rolled)
    steep = 1 / (3 * np.maximum(roots * roots, _DARKEST**2))

    def onward(channels: Sequence[int], change: Planes) -> Planes:
        return np.asarray(CONES_TO_OKLAB @ (steep * (SRGB_TO_CONES[:, channels] @ change)))

    gains = [onward([channel], (lit[channel] * slope[channel])[None]) for channel in range(3)]
    everywhere = (0, 1, 2)
    bent = onward(everywhere, -over * over * (share * share if strength > 0 else 1.0))
    moved = onward(everywhere, np.where(over > 0, start * (1 - slope), 0.0))
    return CONES_TO_OKLAB @ roots, [*gains, bent, moved]


def _tone(parameters: Parameters, lightness: Line, found: Planes) -> tuple[Line, Line]:
    """Power, bend and lift: lightness and its slope; fills in the derivatives to the three."""
    power, bend, lift = float(np.exp(parameters[5])), float(parameters[6]), float(parameters[7])
    level = np.clip(lightness, 0.0, 1.0)
    raised = level**power
    curved = raised + 4 * bend * raised * raised * (1 - raised)
    above = np.maximum(lightness - 1, 0.0)
    slope_above = (1 - lift) * (1 - 4 * bend) * power
    rise = (1 - lift) * (1 + 4 * bend * raised * (2 - 3 * raised)) * power * raised
    dark = np.maximum(level, _DARKEST)
    found[5, 0] = rise * np.log(dark) + above * slope_above
    found[6, 0] = 4 * (1 - lift) * (raised * raised * (1 - raised) - above * power)
    found[7, 0] = 1 - curved - above * (1 - 4 * bend) * power
    carried = lift + (1 - lift) * curved + above * slope_above + np.minimum(lightness, 0.0)
    slope = np.where(lightness > 1, slope_above, np.where(lightness < 0, 1.0, rise / dark))
    return carried, slope


def _chroma(
    parameters: Parameters, oklab: Planes, found: Planes
) -> tuple[tuple[Line, Line], list[list[Line]], tuple[Line, Line]]:
    """The a, b plane: colours, the (2, 2) matrix they came by, their slope with lightness; fills in what is left."""
    lightness, a, b = oklab
    level = np.clip(lightness, 0.0, 1.0)
    factor = np.exp(parameters[8] + parameters[9] * (level - 0.5))
    tint = 4 * level * (1 - level)
    wide, by_stretch, by_shear = _widened(float(parameters[11]), float(parameters[12]))
    cosine, sine = float(np.cos(parameters[10])), float(np.sin(parameters[10]))
    turn = np.array([[cosine, -sine], [sine, cosine]])
    for row, change in ((11, by_stretch), (12, by_shear)):
        turned = turn @ change
        found[row, 1] = factor * (turned[0, 0] * a + turned[0, 1] * b)
        found[row, 2] = factor * (turned[1, 0] * a + turned[1, 1] * b)
    matrix = [[factor * share for share in row] for row in (turn @ wide).tolist()]
    first, second = matrix[0][0] * a + matrix[0][1] * b, matrix[1][0] * a + matrix[1][1] * b
    found[8, 1], found[8, 2] = first, second
    found[9, 1:] = (level - 0.5) * found[8, 1:]
    found[10, 1], found[10, 2] = -second, first
    found[13, 1] = found[14, 2] = tint
    inside = (lightness > 0) & (lightness < 1)
    fall = 4 * (1 - 2 * level)
    along = [
        np.where(inside, parameters[9] * colour + parameters[row] * fall, 0.0)
        for row, colour in ((13, first), (14, second))
    ]
    return (first + parameters[13] * tint, second + parameters[14] * tint), matrix, (along[0], along[1])


def _widened(stretch: float, shear: float) -> tuple[Planes, Planes, Planes]:
    """Return exp([[stretch, shear], [shear, −stretch]]) and its derivatives to the two, (2, 2) each."""
    plane = np.array([[stretch, shear], [shear, -stretch]])
    size = float(np.hypot(stretch, shear))
    even, odd = np.cosh(size), np.sinh(size) / size if size > 0 else 1.0
    bent = (even - odd) / size**2 if size > 1e-4 else 1 / 3
    changes = []
    for value, direction in ((stretch, [[1.0, 0.0], [0.0, -1.0]]), (shear, [[0.0, 1.0], [1.0, 0.0]])):
        changes.append(value * (odd * np.eye(2) + bent * plane) + odd * np.array(direction))
    return even * np.eye(2) + odd * plane, changes[0], changes[1]
