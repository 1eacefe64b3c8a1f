"""Pictures of 24 megapixels for the benchmark: photographs of open wheels, enlarged, with fresh grain."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from truth.grades import Grade

SHAPE = (4000, 6000)
GRAIN = 2.0
"""Deviation of the grain, in 8-bit codes: about that of a small sensor at base sensitivity."""

_GRADE = Grade(stops=0.3, gains=np.array([1.12, 1.0, 0.9]), knee=0.8, power=1.05, chroma=0.9, turn=0.04)


def photograph(shape: tuple[int, int] = SHAPE, *, seed: int = 0) -> NDArray[np.uint8]:
    """Return the temple of scikit-learn's sample images at `shape`."""
    import cv2
    from sklearn.datasets import load_sample_image

    small = load_sample_image("china.jpg")
    large = cv2.resize(small, shape[::-1], interpolation=cv2.INTER_CUBIC)
    noise = np.random.default_rng(seed).normal(0, GRAIN, (512, 512, 3)).astype(np.float32)
    tiles = tuple(-(-side // 512) for side in shape)
    grain = np.tile(noise, (*tiles, 1))[: shape[0], : shape[1]]
    return np.clip(large + grain, 0, 255).astype(np.uint8)


def graded(pixels: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return the pixels as another camera in other light would have rendered them, through a direct table."""
    codes = np.arange(0, 256, 5, dtype=np.uint8)
    from hueferry.applying.engine import Engine
    from hueferry.tables.table import Table

    lattice = np.stack(np.meshgrid(codes, codes, codes, indexing="ij"), axis=-1)
    return Engine(Table(_GRADE(lattice) / 255.0), np.uint8, 8).apply(pixels)


def write_pair(folder: Path, *, subsampling: str = "420", shape: tuple[int, int] = SHAPE) -> tuple[Path, Path]:
    """Write a JPEG pair of the same scene, quality 96: the picture, and a part of it in other light."""
    import imagecodecs

    source = photograph(shape)
    rows, columns = shape[0] // 10, shape[1] // 10
    part = np.ascontiguousarray(source[rows:-rows, columns:-columns])
    paths = folder / f"picture-{subsampling}.jpg", folder / f"reference-{subsampling}.jpg"
    for path, pixels in zip(paths, (source, graded(part)), strict=True):
        path.write_bytes(imagecodecs.jpeg8_encode(pixels, level=96, subsampling=subsampling))
    return paths
