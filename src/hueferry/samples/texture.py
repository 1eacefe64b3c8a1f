"""Patterns of the sample scene: smooth noise, cells, wood, plaster; all from hashes, so no file is needed."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Field = NDArray[np.float32]


def hashed(x: NDArray[np.int64], y: NDArray[np.int64], seed: int) -> Field:
    """Return a number in 0 … 1 for every pair of whole numbers; equal pairs, equal numbers."""
    mixed = (x * 374761393 + y * 668265263 + seed * 974711) & 0xFFFFFFFF
    mixed = ((mixed ^ (mixed >> 13)) * 1274126177) & 0xFFFFFFFF
    return ((mixed ^ (mixed >> 16)) & 0xFFFFFF).astype(np.float32) / np.float32(0xFFFFFF)


def smooth_noise(u: Field, v: Field, *, seed: int, octaves: int = 4) -> Field:
    """Return value noise around 0, within −1 … 1, of (u, v) with the coarsest features of size 1 (Perlin 1985)."""
    total, size, reach = np.zeros_like(u), 1.0, 0.0
    for octave in range(octaves):
        x, y = np.floor(u / size), np.floor(v / size)
        fx, fy = u / size - x, v / size - y
        fx, fy = fx * fx * (3 - 2 * fx), fy * fy * (3 - 2 * fy)
        ix, iy, salt = x.astype(np.int64), y.astype(np.int64), seed * 17 + octave
        low = hashed(ix, iy, salt) * (1 - fx) + hashed(ix + 1, iy, salt) * fx
        high = hashed(ix, iy + 1, salt) * (1 - fx) + hashed(ix + 1, iy + 1, salt) * fx
        total += size * (2 * (low * (1 - fy) + high * fy) - 1)
        reach += size
        size /= 2
    return np.asarray(total / np.float32(reach), dtype=np.float32)


def cracks(u: Field, v: Field, *, seed: int) -> Field:
    """Return 1 on the borders of irregular cells of size 1, falling to 0 inside (Worley 1996)."""
    x, y = np.floor(u).astype(np.int64), np.floor(v).astype(np.int64)
    first, second = np.full_like(u, 9.0), np.full_like(u, 9.0)
    for dx in (-1, 0, 1):
        for dy in (-1, 0, 1):
            px = x + dx + hashed(x + dx, y + dy, seed)
            py = y + dy + hashed(x + dx, y + dy, seed + 1)
            distance = np.hypot(u - px, v - py).astype(np.float32)
            second = np.minimum(second, np.maximum(first, distance))
            first = np.minimum(first, distance)
    return np.asarray(np.clip(1 - (second - first) / np.float32(0.05), 0, 1))


def wood(u: Field, v: Field) -> Field:
    """Return the darkness of wood grain, 0 … 1, along u; planks are 0.24 wide in v."""
    plank = np.floor(v / 0.24)
    shift = hashed(plank.astype(np.int64), plank.astype(np.int64) * 0, 5) * 40
    bend = smooth_noise(u * 1.3 + shift, v * 5, seed=3, octaves=3)
    rings = 0.5 + 0.5 * np.sin((v * 60 + bend * 5 + shift) * 2)
    pores = smooth_noise(u * 14 + shift, v * 420, seed=9, octaves=2)
    return np.asarray(np.clip(0.34 * rings + 0.3 * np.clip(pores, 0, 1) + 0.25 * bend + 0.2, 0, 1))
