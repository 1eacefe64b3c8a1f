"""What is kept of every picture of a series: enough to link it and to measure its colours, in less than 1 MB."""

from __future__ import annotations

from math import sqrt
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, read_only
from hueferry.evidence.keypoints import Keypoints
from hueferry.evidence.reduced import Reduced, even_out, reduce_picture
from hueferry.picture import Picture

PIXELS = 60_000
"""Pixels kept of a picture at most."""

KEYPOINTS = 700
"""Keypoints kept at most, the strongest first; they are found on the larger reduced form."""

WORDS = 512
"""Length of the signature by which likely partners are found."""

_BITS = 9
_COLOURS = 2000


@attrs.frozen(eq=False)
class View:
    """A picture of a series, packed; `unpack` gives the reduced form that evidence is gathered on.

    Attributes:
        name: relative path of the picture, as people know it; names order a series.
        taken: time of capture in seconds since any common moment, or None.
        packed: (height, width, 3) float16 Oklab.
        flags: (height, width) uint8: bits 0–2 channels at their lower end, 3–5 at their upper end, 6 usable.
        points: (n, 2) float32 keypoints (x, y) in pixels of this view.
        descriptors: (n, 128) float16 of length 1.
        signature: (WORDS,) float32 of length 1, or 0: how often which kind of keypoint stands in the picture.
        palette: (8,) what a palette is found by: mean and deviation of Oklab, and two shares of lightness.
        shape: (rows, columns) of the picture at full size.
        exposure: exposure value in stops at ISO 100, or None.
    """

    name: str
    taken: float | None
    packed: NDArray[np.float16]
    flags: NDArray[np.uint8]
    points: NDArray[np.float32]
    descriptors: NDArray[np.float16]
    signature: NDArray[np.float32]
    palette: NDArray[np.float64] = attrs.field(converter=read_only)
    shape: tuple[int, int]
    exposure: float | None = None

    @property
    def nbytes(self) -> int:
        """Bytes that the arrays take."""
        arrays: tuple[NDArray[Any], ...] = (
            self.packed, self.flags, self.points, self.descriptors, self.signature, self.palette,
        )  # fmt: skip
        return sum(array.nbytes for array in arrays)

    @property
    def keypoints(self) -> Keypoints:
        """Where the picture can be recognised."""
        return Keypoints(self.points.astype(np.float64), self.descriptors.astype(np.float32))

    @property
    def colours(self) -> Colours:
        """At most 2,000 usable Oklab colours (n, 3), evenly spread over the picture; the same ones each time."""
        usable = self.packed[(self.flags >> 6) & 1 == 1]
        step = max(1, len(usable) // _COLOURS)
        return np.asarray(usable[::step], dtype=np.float64)

    def unpack(self) -> Reduced:
        """Return the reduced form."""
        bits = (self.flags[:, :, None] >> np.arange(7, dtype=np.uint8)) & 1 == 1
        oklab = self.packed.astype(np.float32)
        return Reduced(
            oklab=oklab,
            gray=even_out(oklab[:, :, 0], reach=_reach(oklab.shape[1])),
            usable=bits[:, :, 6],
            low=bits[:, :, :3],
            high=bits[:, :, 3:6],
            shape=self.shape,
            exposure=self.exposure,
        )


def view_of(picture: Picture, name: str, *, taken: float | None = None) -> View:
    """Make the view of a picture.

    Args:
        picture: any picture.
        name: its relative path.
        taken: time of capture in seconds, where it is known.
    """
    reduced = reduce_picture(picture)
    found = reduced.keypoints
    small = reduce_picture(picture, max_pixels=PIXELS)
    scale = sqrt(small.gray.size / reduced.gray.size)
    order = np.arange(min(KEYPOINTS, len(found)))
    bits = np.concatenate([small.low, small.high, small.usable[:, :, None]], axis=2).astype(np.uint8)
    return View(
        name=name,
        taken=taken,
        packed=small.oklab.astype(np.float16),
        flags=(bits << np.arange(7, dtype=np.uint8)).sum(axis=2).astype(np.uint8),
        points=((found.points[order] + 0.5) * scale - 0.5).astype(np.float32),
        descriptors=found.descriptors[order].astype(np.float16),
        signature=_signature(found.descriptors[order]),
        palette=_palette_key(small),
        shape=picture.shape,
        exposure=small.exposure,
    )


def _reach(columns: int) -> int:
    """Half the window that evens a view out: the same part of a picture as on the larger reduced form."""
    return max(6, round(24 * min(1.0, columns / 600)))


def _signature(descriptors: NDArray[np.float32]) -> NDArray[np.float32]:
    """Count keypoints by the signs of nine fixed random projections: a bag of visual words.

    References:
        Sivic & Zisserman (2003), Video Google; Charikar (2002), Similarity estimation by rounding (the projections).
    """
    if not len(descriptors):
        return np.zeros(WORDS, dtype=np.float32)
    axes = np.random.default_rng(20).standard_normal((descriptors.shape[1], _BITS)).astype(np.float32)
    signs = (descriptors - np.float32(1 / 16)) @ axes > 0
    counts = np.bincount(signs @ (1 << np.arange(_BITS)), minlength=WORDS)
    shares = np.sqrt(counts.astype(np.float32))
    return np.asarray(shares / np.linalg.norm(shares), dtype=np.float32)


def _palette_key(small: Reduced) -> NDArray[np.float64]:
    colours = small.colours
    if not len(colours):
        return np.zeros(8)
    lightness = colours[:, 0]
    shares = [float((lightness < 0.35).mean()), float((lightness > 0.75).mean())]
    return np.array([*colours.mean(axis=0), *(2 * colours.std(axis=0)), *np.multiply(0.3, shares)])
