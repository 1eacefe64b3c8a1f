"""What is not a stained bright-field slide, and which stains must not be evened out unasked."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.slides.glass import Planes
from hueferry.slides.tissue import Regions

_DARK, _MOST_DARK = 0.2, 0.5
_LEAST_COLOUR = 0.012
BROWN_SHARE = 0.05
"""Share of the tissue in brown above which a stain's amount is taken to be the measurement."""


def reason_against(thumbnail: Planes, regions: Regions) -> str | None:
    """Return why a picture cannot be treated as a bright-field slide, or None where it can.

    Args:
        thumbnail: (height, width, 3) codes, 0 … 1.
        regions: its regions.
    """
    scanned = thumbnail[~regions.padding]
    if len(scanned) == 0:
        return "nothing was scanned: every pixel is black"
    dark = scanned.max(axis=1) < _DARK
    if regions.padding.mean() > 0.3 and not regions.glass.seen:
        dark = thumbnail.reshape(-1, 3).max(axis=1) < _DARK
    if dark.mean() > _MOST_DARK:
        return (
            f"{100 * dark.mean():.0f} % of it is dark, as in fluorescence or dark field, where light adds up and "
            "optical density has no meaning; give bright-field slides"
        )
    spread = scanned.max(axis=1) - scanned.min(axis=1)
    if float(np.percentile(spread, 99)) < _LEAST_COLOUR:
        return "it has no colour, as in phase contrast or an unstained section; there is no stain to bring together"
    return None


def brown_share(density: NDArray[np.float64]) -> float:
    """Return the share of (n, 3) tissue densities that are brown: blue absorbed most, then green, then red."""
    strong = density[density.max(axis=1) > 0.2]
    if len(strong) == 0:
        return 0.0
    red, green, blue = strong.T
    return float(((blue > 1.1 * green) & (green > 1.15 * red)).sum() / len(density))


def amount_is_measured(density: NDArray[np.float64]) -> bool:
    """Tell whether the amount of a stain on this slide is likely to be the measurement itself, as with DAB."""
    return brown_share(density) > BROWN_SHARE
