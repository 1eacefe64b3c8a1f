"""What on a slide is tissue, and what is glass, pen, dust, a coverslip's edge or haze."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Mask
from hueferry.slides.glass import Glass, Planes, find_glass

PALEST = 0.025
"""Mean optical density, smoothed, above which something lies on the glass."""

_SPECK = 2e-4
_PEN_SHARE = 1e-3


@attrs.frozen(eq=False)
class Regions:
    """A slide's thumbnail, sorted.

    Attributes:
        tissue: (height, width) stained tissue.
        pen: pen marks.
        padding: outside the scanned area.
        glass: the glass.
        sharpness: mean contrast of fine detail in tissue relative to coarse detail; low means out of focus.
        hazy: share of the tissue without fine detail.
    """

    tissue: Mask
    pen: Mask
    padding: Mask
    glass: Glass
    sharpness: float
    hazy: float

    @property
    def tissue_share(self) -> float:
        """Share of the scanned area that is tissue."""
        scanned = float((~self.padding).sum())
        return float(self.tissue.sum()) / scanned if scanned else 0.0


def find_tissue(thumbnail: Planes, *, mask: Mask | None = None) -> Regions:
    """Sort the thumbnail of a slide.

    Args:
        thumbnail: (height, width, 3) codes, 0 … 1.
        mask: (height, width) where tissue may be; None looks everywhere.
    """
    from scipy import ndimage

    glass = find_glass(thumbnail)
    density = -np.log10(np.maximum(thumbnail, 1e-3) / glass.shading)
    smooth = ndimage.uniform_filter(density, (3, 3, 1), mode="nearest")
    threshold = max(PALEST, 3 * glass.noise / 3) if glass.seen else 0.04
    pen = find_pen(smooth, glass.padding)
    found = (smooth.mean(axis=2) > threshold) & ~glass.padding & ~ndimage.binary_dilation(pen, iterations=2)
    tissue = _without_lines_and_dust(found)
    if mask is not None:
        tissue &= mask
    sharpness, hazy = _focus(density.mean(axis=2, dtype=np.float64), tissue)
    return Regions(tissue, pen, glass.padding, glass, sharpness, hazy)


def find_pen(density: Planes, padding: Mask) -> Mask:
    """Return pen marks: smooth, strong, of a colour that stains do not have, and not small.

    Stains of sections absorb green more than the lesser of red and blue; inks need not. Black ink absorbs all alike.
    Blue ink is near to haematoxylin, but has no nuclei: it must be even.
    """
    from scipy import ndimage

    red, green, blue = np.moveaxis(density, -1, 0)
    strongest, weakest = density.max(axis=2), density.min(axis=2)
    green_ink = (green < 0.75 * np.minimum(red, blue)) & (strongest > 0.25)
    even = ndimage.generic_gradient_magnitude(strongest, ndimage.sobel) < 0.5 * strongest
    blue_ink = (red > 1.15 * green) & (red > 0.35) & even
    red_ink = (blue > 0.8 * green) & (green > 0.4) & (red < 0.2 * green)
    black_ink = (weakest > 0.85 * strongest) & (weakest > 0.8)
    ink = (green_ink | blue_ink | red_ink | black_ink) & ~padding
    ink = ndimage.binary_opening(ink, iterations=2)
    labels, count = ndimage.label(ink)
    if count == 0:
        return np.asarray(ink)
    sizes = np.bincount(labels.ravel())
    large = sizes >= _PEN_SHARE * ink.size
    large[0] = False
    core = large[labels]
    return np.asarray(ndimage.binary_dilation(core, iterations=3) & (strongest > 0.05))


def _without_lines_and_dust(found: Mask) -> Mask:
    """Drop what is thinner than three pixels or smaller than a speck; keep the outline of what stays."""
    from scipy import ndimage

    padded = np.pad(found, 3, mode="edge")
    core = ndimage.binary_opening(padded, structure=np.ones((5, 5), dtype=bool))
    kept = padded & ndimage.binary_dilation(core, structure=np.ones((3, 3), dtype=bool), iterations=2)
    kept = kept[3:-3, 3:-3]
    labels, count = ndimage.label(kept)
    if count == 0:
        return np.asarray(kept)
    sizes = np.bincount(labels.ravel())
    large = sizes >= max(_SPECK * found.size, 30)
    large[0] = False
    return np.asarray(large[labels])


def _focus(density: NDArray[np.float64], tissue: Mask) -> tuple[float, float]:
    """Return fine over coarse contrast in tissue, and the share of tissue where it is below a tenth."""
    from scipy import ndimage

    if not tissue.any():
        return 0.0, 0.0
    fine = np.abs(density - ndimage.gaussian_filter(density, 1.0))
    coarse = np.abs(density - ndimage.gaussian_filter(density, 4.0))
    fine, coarse = (ndimage.uniform_filter(plane, 15) for plane in (fine, coarse))
    ratio = fine[tissue] / np.maximum(coarse[tissue], 1e-4)
    return float(ratio.mean()), float((ratio < 0.1).mean())
