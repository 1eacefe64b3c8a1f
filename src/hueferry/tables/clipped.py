"""What becomes of pixels whose channels are all clipped: nobody knows their colour, so they stay neutral."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from hueferry.arrays import Codes

_STEEPEST = 1.2
"""How much the way back to neutral may add to the gain of the map."""

_NARROWEST, _WIDEST = 1 / 48, 1 / 16
"""Reach of the way back, in codes of 0 … 1. Twice as far would cost bright surfaces a tenth of their correction."""


def hold_clipped(function: Callable[[Codes], Codes]) -> Callable[[Codes], Codes]:
    """Return `function` with neutral results at both ends of the gray axis, and a straight way back to its own.

    A pixel clipped in all channels was at least that bright in each, so at white the lower channels are raised to
    the highest, and at black the higher ones are lowered to the lowest. Both pull outwards, so neither can fold.

    Args:
        function: (n, 3) codes to (n, 3) codes, in any encoding whose equal codes are neutral.
    """
    black, white = function(np.array([[0.0] * 3, [1.0] * 3]))
    raised = np.clip(min(white.max(), 1.0) - white, 0.0, None)
    lowered = np.clip(max(black.min(), 0.0) - black, None, 0.0)
    if raised.max() < 1e-7 and lowered.min() > -1e-7:
        return function

    def held(codes: Codes) -> Codes:
        codes = np.asarray(codes)
        red, green, blue = codes.T  # channel by channel is several times faster than along the last axis
        near_white = _nearness(1.0 - np.minimum(np.minimum(red, green), blue), float(raised.max()))
        near_black = _nearness(np.maximum(np.maximum(red, green), blue), float(-lowered.min()))
        return np.asarray(function(codes) + near_white[:, None] * raised + near_black[:, None] * lowered)

    return held


def _nearness(distance: Codes, shift: float) -> Codes:
    reach = min(max(shift / _STEEPEST, _NARROWEST), _WIDEST)
    return np.asarray(np.clip(1.0 - distance / reach, 0.0, 1.0))
