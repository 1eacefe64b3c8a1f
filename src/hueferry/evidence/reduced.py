"""The reduced form of a picture: small enough to search, exact enough to measure colours on.

All evidence is gathered on this form. It is made once a picture, by area averaging of the native codes, so a
reference that serves a thousand pictures is reduced once.
"""

from __future__ import annotations

from functools import cached_property
from math import sqrt

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Mask, Pixels
from hueferry.colour.scene import white_code
from hueferry.colour.spaces import xyz_to_oklab
from hueferry.errors import InputError
from hueferry.evidence.blocks import Content, content_of
from hueferry.evidence.exposure import exposure_value
from hueferry.evidence.keypoints import Keypoints, find_keypoints
from hueferry.evidence.scene import Scene, scene_of
from hueferry.picture import Picture

MAX_PIXELS = 250_000
"""Pixels of the reduced form at most: keypoints are as sure as on more, and found in a tenth of a second."""

CLIPPED = 1.5 / 255
"""Codes closer than this to either end of the range may have been clipped."""


@attrs.frozen(eq=False)
class Reduced:
    """A picture, averaged down to at most `MAX_PIXELS`.

    Attributes:
        oklab: (height, width, 3) float32 colours.
        gray: (height, width) uint8, lightness with its local mean and contrast evened out: what keypoints are
            searched on, so that a change of light leaves them where they are.
        usable: (height, width), true where a pixel counts: inside the mask, opaque, finite.
        low: (height, width, 3), true where a channel stands at the lower end of its range: it may have been less.
        high: (height, width, 3), true where a channel stands at the upper end: it may have been more. Of
            scene-linear light that is diffuse white, beyond which `BeyondWhite` carries on.
        shape: (rows, columns) of the picture at full size.
        exposure: exposure value in stops at ISO 100 (log2 of f-number² ÷ time, less log2 of ISO ÷ 100), or None
            where the file does not say.
    """

    oklab: NDArray[np.float32]
    gray: NDArray[np.uint8]
    usable: Mask
    low: NDArray[np.bool_]
    high: NDArray[np.bool_]
    shape: tuple[int, int]
    exposure: float | None = None

    @property
    def clipped(self) -> Mask:
        """(height, width), true where any channel stands at either end of its range."""
        return np.asarray((self.low | self.high).any(axis=2))

    @property
    def is_gray(self) -> bool:
        """Whether nothing in the picture has a colour worth the name (Oklab chroma 0.01, about ΔE00 1)."""
        coarse = self.oklab[::16, ::16][self.usable[::16, ::16]]
        if np.abs(coarse[:, 1:]).max(initial=0.0) >= 0.01:
            return False  # most pictures are settled by one pixel in 256
        return bool(np.abs(self.oklab[self.usable][:, 1:]).max(initial=0.0) < 0.01)

    @cached_property
    def keypoints(self) -> Keypoints:
        """Where the picture can be recognised; found once."""
        return find_keypoints(self.gray, self.usable)

    @cached_property
    def scene(self) -> Scene:
        """The picture as patches, without what is clipped; found once."""
        return scene_of(self.oklab, self.usable & ~self.clipped)

    @cached_property
    def content(self) -> Content:
        """What content alone does within the picture; found once."""
        return content_of(self.scene)

    @property
    def colours(self) -> Colours:
        """(n, 3) Oklab colours of the usable pixels, row by row."""
        return self.oklab[self.usable].astype(np.float64)

    def colours_under(self, mask: Mask) -> Colours:
        """Return (n, 3) usable colours where `mask`, of the full size, is true.

        Raises:
            InputError: the mask has another shape than the picture.
        """
        if mask.shape != self.shape:
            raise InputError(f"the mask is {mask.shape}, and the picture is {self.shape}; give a mask of the same size")
        share = _shrink(mask[:, :, None].astype(np.float32), (self.gray.shape[0], self.gray.shape[1]))[:, :, 0]
        return self.oklab[self.usable & (share >= 0.5)].astype(np.float64)


def reduce_picture(picture: Picture, *, mask: Mask | None = None, max_pixels: int = MAX_PIXELS) -> Reduced:
    """Reduce `picture` to at most `max_pixels`.

    Args:
        picture: any picture.
        mask: (height, width) of the full size, true where a pixel counts; None counts all.
        max_pixels: size of the reduced form; > 0.

    Raises:
        InputError: the mask has another shape than the picture.
    """
    if mask is not None and mask.shape != picture.shape:
        raise InputError(f"the mask is {mask.shape}, and the picture is {picture.shape}; give a mask of the same size")
    height, width = picture.shape
    factor = min(1.0, sqrt(max_pixels / (height * width)))
    size = max(1, round(height * factor)), max(1, round(width * factor))
    colour_channels = 1 if picture.is_gray else 3
    codes = _shrink(picture.pixels[:, :, :colour_channels], size).astype(np.float64) / picture.top_code
    codes = np.broadcast_to(codes, (*size, 3)) if colour_channels == 1 else codes
    usable = np.isfinite(codes).all(axis=2) & _counted(picture, mask, size)
    codes = np.where(usable[:, :, None], codes, 0.0)
    oklab = xyz_to_oklab(picture.encoding.to_xyz(codes.reshape(-1, 3))).reshape(*size, 3).astype(np.float32)
    return Reduced(
        oklab=oklab,
        gray=even_out(oklab[:, :, 0]),
        usable=usable,
        low=codes < CLIPPED,
        high=codes > white_code(picture.encoding) - CLIPPED,
        shape=picture.shape,
        exposure=exposure_value(picture.metadata.exif),
    )


def even_out(lightness: NDArray[np.float32], *, reach: int = 24) -> NDArray[np.uint8]:
    """Even out local mean and contrast of (height, width) lightness: 128 is the local mean, ±40 one deviation."""
    import cv2

    window = (2 * reach + 1, 2 * reach + 1)
    mean = cv2.blur(lightness, window)
    variance = cv2.blur(lightness * lightness, window) - mean * mean
    evened = (lightness - mean) / np.sqrt(np.maximum(variance, 0) + np.float32(0.02) ** 2)
    return np.clip(evened * 40 + 128, 0, 255).astype(np.uint8)


def _shrink(pixels: Pixels, size: tuple[int, int]) -> Pixels:
    """Average (height, width, channels) down to `size` (rows, columns); (…, 1) keeps its last axis."""
    import cv2

    if pixels.shape[:2] == size:
        return pixels
    shrunk = np.ascontiguousarray(pixels)
    # Halving has a path of its own that is far faster than averaging over 9.8 pixels, say, all at once.
    while all(side % 2 == 0 and side >= 4 * wanted for side, wanted in zip(shrunk.shape[:2], size, strict=True)):
        shrunk = cv2.resize(shrunk, (shrunk.shape[1] // 2, shrunk.shape[0] // 2), interpolation=cv2.INTER_AREA)
    shrunk = cv2.resize(shrunk, (size[1], size[0]), interpolation=cv2.INTER_AREA)
    return shrunk if shrunk.ndim == 3 else shrunk[:, :, None]


def _counted(picture: Picture, mask: Mask | None, size: tuple[int, int]) -> Mask:
    """Tell which reduced pixels count: only those whose full-size pixels all (to 98 %) count."""
    counted = np.ones(size, dtype=bool)
    if picture.has_alpha:
        counted &= _shrink(picture.pixels[:, :, -1:], size)[:, :, 0] >= 0.98 * picture.top_code
    if mask is not None:
        counted &= _shrink(mask[:, :, None].astype(np.float32), size)[:, :, 0] >= 0.98
    return counted
