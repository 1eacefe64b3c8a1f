"""Keypoints that survive a change of light, and their matches."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Mask

MOST = 1500
"""Keypoints a picture at most, the strongest first."""

FAINTEST = 0.005
"""Least contrast of a keypoint: out of focus, faint ones are all there are, and chance is judged later."""

RATIO = 0.85
"""Largest distance to the best match over that to the second best (Lowe 2004, section 7.1)."""


@attrs.frozen(eq=False)
class Keypoints:
    """Where a picture can be recognised.

    Attributes:
        points: (n, 2) pixels (x, y).
        descriptors: (n, 128) float32 of length 1: square roots of SIFT shares (Arandjelović & Zisserman 2012).
    """

    points: NDArray[np.float64]
    descriptors: NDArray[np.float32]

    def __len__(self) -> int:
        return len(self.points)


def find_keypoints(gray: NDArray[np.uint8], counted: Mask) -> Keypoints:
    """Find up to `MOST` scale-invariant keypoints (Lowe 2004) of a (height, width) picture, where `counted` is true."""
    import cv2

    if min(gray.shape) < 16:
        return Keypoints(np.empty((0, 2)), np.empty((0, 128), dtype=np.float32))
    detector = cv2.SIFT_create(nfeatures=MOST, contrastThreshold=FAINTEST)  # type: ignore[attr-defined]
    found, descriptors = detector.detectAndCompute(gray, counted.astype(np.uint8))
    if descriptors is None or not len(found):
        return Keypoints(np.empty((0, 2)), np.empty((0, 128), dtype=np.float32))
    shares = descriptors[:MOST] / np.maximum(descriptors[:MOST].sum(axis=1, keepdims=True), 1e-9)
    points = np.array([keypoint.pt for keypoint in found[:MOST]], dtype=np.float64)
    return Keypoints(points, np.sqrt(shares).astype(np.float32))


def match(source: Keypoints, reference: Keypoints) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return (k, 2) source and (k, 2) reference pixels of keypoints that chose each other and no other."""
    if len(source) < 2 or len(reference) < 2:
        return np.empty((0, 2)), np.empty((0, 2))
    likeness = source.descriptors @ reference.descriptors.T
    forward, backward = likeness.argmax(axis=1), likeness.argmax(axis=0)
    rows = np.arange(len(source))
    best = likeness[rows, forward]
    likeness[rows, forward] = -1.0
    second = likeness.max(axis=1)
    clear = (1 - best) < RATIO**2 * (1 - second)  # squared distances of unit vectors are 2 − 2 × likeness
    chosen = clear & (backward[forward] == rows)
    return source.points[chosen], reference.points[forward[chosen]]
