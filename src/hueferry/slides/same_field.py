"""Densities of the same places, where two slides show the same field: one section on two scanners, or stained again.

The change of stain is affine in density, and so commutes with averages of density, but not with averages of codes or
of colours. Both pictures are therefore turned into densities first, at the full size of the thumbnail, and smoothed
then; what is left of noise and of a misplacement by a part of a pixel is small beside what is compared.
"""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours
from hueferry.picture import Picture
from hueferry.slides.density import Density
from hueferry.slides.look import Look
from hueferry.slides.reference import SlideReference, between

LEAST_PAIRS = 300
"""Surfaces found in both pictures below which they are not taken to show the same field."""

_SMALLEST = 64
_SMOOTH = 2.0
_MOST_PLACES = 40_000
_MISPLACED = 0.3
"""Pixels by which a place may be off."""

_NOISE = 0.004
"""Optical density, after smoothing."""

Homography = NDArray[np.float64]


@attrs.frozen(eq=False)
class Field:
    """The same places in two slides: (n, 3) densities in either, and (n,) how far each is to be trusted."""

    source: Colours
    reference: Colours
    weights: NDArray[np.float64]


def same_field(look: Look, reference: SlideReference) -> Field | None:
    """Return densities of the same places in a slide and its reference, or None where they show different fields."""
    if reference.picture is None or min(*look.thumbnail.shape[:2], *reference.picture.shape) < _SMALLEST:
        return None
    from hueferry.evidence.pairs import find_pairs
    from hueferry.evidence.reduced import reduce_picture

    here, there = reduce_picture(look.picture), reduce_picture(reference.picture)
    pairs = find_pairs(here, there)
    if pairs is None or len(pairs) < LEAST_PAIRS:
        return None
    into = _scaling(there.gray.shape, reference.picture.shape)
    carry = into @ pairs.homography @ np.linalg.inv(_scaling(here.gray.shape, look.thumbnail.shape[:2]))
    field = _read(look, reference, reference.picture, carry)
    return field if len(field.weights) >= LEAST_PAIRS else None


def _scaling(small: tuple[int, ...], large: tuple[int, ...]) -> Homography:
    """Return what carries (x, y) of a reduced picture to (x, y) of the picture, from pixel centre to pixel centre."""
    down, across = (wide / narrow for wide, narrow in zip(large[:2], small[:2], strict=True))
    return np.array([[across, 0, across / 2 - 0.5], [0, down, down / 2 - 0.5], [0, 0, 1.0]])


def _read(look: Look, reference: SlideReference, picture: Picture, carry: Homography) -> Field:
    from scipy import ndimage

    height, width = look.thumbnail.shape[:2]
    step = max(1, int(np.sqrt(height * width / _MOST_PLACES)))
    rows, columns = (axis.ravel() for axis in np.mgrid[step // 2 : height : step, step // 2 : width : step])
    lifted = np.stack([columns, rows, np.ones_like(rows)]).T @ carry.T
    x, y = lifted[:, 0] / lifted[:, 2], lifted[:, 1] / lifted[:, 2]
    edge = 2 * _SMOOTH
    seen = (x >= edge) & (y >= edge) & (x <= picture.shape[1] - 1 - edge) & (y <= picture.shape[0] - 1 - edge)
    seen &= ~(look.regions.pen | look.regions.padding)[rows, columns]
    scale = float(np.sqrt(abs(np.linalg.det(carry[:2, :2]))))
    encoding = look.scale.encoding
    ours = _smooth_density(look.picture, look.scale, _SMOOTH)
    theirs = _smooth_density(picture, reference.scale(encoding), _SMOOTH * scale, given=reference)
    source = ours[rows[seen], columns[seen]]
    places = np.stack([y[seen], x[seen]])
    goal = np.stack([ndimage.map_coordinates(theirs[..., k], places, order=1) for k in range(3)], axis=1)
    steep = np.stack([np.hypot(*np.gradient(ours[..., k])) for k in range(3)], axis=2)[rows[seen], columns[seen]]
    doubt = _NOISE**2 + _MISPLACED**2 * (steep**2).sum(axis=1)
    weights = _NOISE**2 / doubt
    return Field(source.astype(np.float64), goal.astype(np.float64), weights / max(weights.mean(), 1e-12))


def _smooth_density(
    picture: Picture, scale: Density, width: float, *, given: SlideReference | None = None
) -> NDArray[np.float32]:
    """Return the density of a picture, (height, width, 3), smoothed; row by row, to save memory."""
    from scipy import ndimage

    top = 1.0 if picture.pixels.dtype == np.float32 else float(2**picture.bits - 1)
    density = np.empty((*picture.shape, 3), np.float32)
    for row, pixels in enumerate(picture.pixels):
        codes = pixels[:, :3].astype(np.float64) / top
        density[row] = scale.of(codes if given is None else between(codes, given.encoding, scale.encoding))
    return np.asarray(ndimage.gaussian_filter(density, (width, width, 0), truncate=3.0))
