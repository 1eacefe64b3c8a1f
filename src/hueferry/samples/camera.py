"""The camera of the samples: from scene-linear light to an encoded picture, with grain and a tone curve."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.transfer import linear_to_srgb
from hueferry.samples.render import Layers

Rgb = tuple[float, float, float]


@attrs.frozen
class Light:
    """The light of a moment: colour and strength of window and room, linear sRGB."""

    window: Rgb
    room: Rgb


@attrs.frozen
class Exposure:
    """What the camera was set to.

    Attributes:
        stops: exposure over the hero frame's.
        gains: white balance.
        chroma: factor of the rendering.
    """

    stops: float = 0.0
    gains: Rgb = (1.0, 1.0, 1.0)
    chroma: float = 1.0


def lit(layers: Layers, light: Light) -> NDArray[np.float32]:
    """Add up the parts of a scene under a light: (height, width, 3) scene-linear."""
    window, room = np.array(light.window, np.float32), np.array(light.room, np.float32)
    return np.asarray(layers.window * window + layers.room * room)


def photograph(
    linear: NDArray[np.float32], exposure: Exposure, *, grain: float = 0.0, seed: int = 0
) -> NDArray[np.float64]:
    """Expose, balance and develop scene-linear light: (height, width, 3) sRGB codes 0 … 1.

    Args:
        linear: scene-linear light.
        exposure: of the camera.
        grain: strength of sensor noise, 0 for none; its variance grows with the light as photon counts do.
        seed: of the grain.
    """
    sensed = linear.astype(np.float64) * 2.0**exposure.stops * _vignette(linear.shape[:2])[..., None]
    if grain > 0:
        rng = np.random.default_rng(seed)
        sensed = sensed + grain * np.sqrt(np.maximum(sensed, 0) * 0.01 + 2e-5) * rng.standard_normal(sensed.shape)
    balanced = np.maximum(sensed * np.array(exposure.gains) * 2.3, 0.0)
    developed = 1 - np.exp(-balanced - 0.25 * balanced**2 / (0.4 + balanced))
    gray = developed @ np.array([0.2126, 0.7152, 0.0722])
    vivid = gray[..., None] + exposure.chroma * (developed - gray[..., None])
    return linear_to_srgb(np.clip(vivid, 0.0, 1.0))


def _vignette(size: tuple[int, int]) -> NDArray[np.float64]:
    rows, columns = size
    y, x = np.mgrid[-1 : 1 : rows * 1j, -1 : 1 : columns * 1j]
    return np.asarray(1 - 0.13 * (x**2 + (y * rows / columns) ** 2))
