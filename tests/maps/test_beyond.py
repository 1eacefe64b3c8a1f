"""Light beyond diffuse white, against gains in closed form."""

from __future__ import annotations

import numpy as np

from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.maps.beyond import BeyondWhite


def gain(colours: np.ndarray) -> np.ndarray:
    return linear_srgb_to_oklab(oklab_to_linear_srgb(colours) * [0.5, 0.7, 0.6])


def rolled(colours: np.ndarray) -> np.ndarray:
    """A camera's shoulder: it would flatten everything beyond white."""
    return gain(colours) / (1 + 0.2 * np.maximum(colours[:, :1], 0) ** 8)


def test_a_gain_stays_a_gain_however_bright() -> None:
    light = np.exp2(np.random.default_rng(0).uniform(-8, 7, (200, 3)))
    colours = linear_srgb_to_oklab(light)

    np.testing.assert_allclose(BeyondWhite(gain)(colours), gain(colours), atol=1e-9)


def test_below_white_nothing_changes_and_above_it_ratios_stay() -> None:
    """Cube roots: eight times the light is twice L, a and b."""
    colours = linear_srgb_to_oklab(np.random.default_rng(1).random((100, 3)))
    white = colours / colours[:, :1]

    np.testing.assert_array_equal(BeyondWhite(rolled)(colours[colours[:, 0] <= 1]), rolled(colours[colours[:, 0] <= 1]))
    np.testing.assert_allclose(BeyondWhite(rolled)(2 * white), 2 * rolled(white), rtol=1e-12)
    np.testing.assert_allclose(BeyondWhite(rolled)(white * (1 + 1e-9)), rolled(white), atol=1e-8)
