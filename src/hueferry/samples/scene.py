"""The bench of Marrowfield Tileworks: a tiled wall, a wooden bench, glazed vessels, a window on the left."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.samples.shapes import Plane, Rays, Shape, Vessel, dot
from hueferry.samples.texture import cracks, hashed, smooth_noise, wood

TILE = 0.2
GROUT = 0.006
PANEL_LEFT, PANEL_RIGHT, PANEL_TOP = -1.0, 1.0, 1.0

GLAZES = np.array(
    [
        [0.34, 0.47, 0.36],  # celadon
        [0.055, 0.115, 0.31],  # cobalt
        [0.36, 0.052, 0.040],  # oxblood
        [0.56, 0.29, 0.060],  # honey
        [0.74, 0.69, 0.57],  # cream
        [0.115, 0.30, 0.315],  # teal
        [0.19, 0.17, 0.155],  # slate
    ],
    dtype=np.float32,
)
"""Reflectance of the glazes, linear sRGB."""

PLASTER = np.array([0.62, 0.585, 0.525], dtype=np.float32)
WOOD_LIGHT = np.array([0.36, 0.215, 0.115], dtype=np.float32)
WOOD_DARK = np.array([0.105, 0.052, 0.025], dtype=np.float32)
GROUT_COLOUR = np.array([0.40, 0.37, 0.33], dtype=np.float32)

VESSELS: tuple[tuple[Vessel, int], ...] = (
    (Vessel(-0.46, 0.44, 0.215, 0.185, 0.20, 0.215), 5),
    (Vessel(0.13, 0.60, 0.155, 0.125, 0.14, 0.165), 3),
    (Vessel(0.56, 0.36, 0.175, 0.19, 0.20, 9.0), 2),
    (Vessel(-0.10, 0.32, 0.105, 0.14, 0.17, 0.25), 4),
    (Vessel(0.92, 0.62, 0.135, 0.11, 0.125, 0.145), 0),
    (Vessel(-0.98, 0.56, 0.13, 0.135, 0.15, 0.20), 1),
    (Vessel(0.33, 0.88, 0.085, 0.072, 0.08, 0.10), 6),
)
"""Vessels and the number of their glaze."""

WALL, BENCH = Plane(2, 0.0), Plane(1, 0.0)
SHAPES: tuple[Shape, ...] = (WALL, BENCH, *(vessel for vessel, _ in VESSELS))


@attrs.frozen(eq=False)
class Surface:
    """What rays met.

    Attributes:
        albedo: (n, 3) diffuse reflectance.
        normals: (n, 3) unit normals after relief.
        gloss: (n,) strength of the mirror image, 0 … 1.
        roughness: (n,) its blur, as a sine.
    """

    albedo: Rays
    normals: Rays
    gloss: NDArray[np.float32]
    roughness: NDArray[np.float32]


def surface_of(index: int, points: Rays, normals: Rays) -> Surface:
    """Return material and relief of (n, 3) points on shape `index`."""
    if index == 0:
        return _wall(points, normals)
    if index == 1:
        return _bench(points, normals)
    vessel, glaze = VESSELS[index - 2]
    return _glazed(points, normals, vessel, glaze)


def _wall(points: Rays, normals: Rays) -> Surface:
    x, y = points[:, 0], points[:, 1]
    column, row = np.floor(x / TILE).astype(np.int64), np.floor(y / TILE).astype(np.int64)
    u, v = x / TILE - column - 0.5, y / TILE - row - 0.5
    border = np.maximum(np.abs(u), np.abs(v))
    tiled = (x > PANEL_LEFT) & (x < PANEL_RIGHT) & (y < PANEL_TOP)
    on_tile = tiled & (border < 0.5 - GROUT / TILE)
    choice = (hashed(column, row, 3) * len(GLAZES) * 0.999).astype(np.int64)
    own = hashed(column, row, 11)[:, None]
    pooled = np.clip((border - 0.40) / 0.08, 0, 1)[:, None]
    cloud = smooth_noise(x * 22, y * 22, seed=2)[:, None]
    craze = cracks(x * 62, y * 62, seed=4)[:, None] * (own > 0.35)
    tile = GLAZES[choice] * (0.84 + 0.32 * own) * (1 + 0.14 * cloud) * (1 - 0.30 * pooled) * (1 - 0.22 * craze)
    rough = smooth_noise(x * 90, y * 90, seed=6)[:, None]
    grout = GROUT_COLOUR * (0.9 + 0.25 * rough)
    stain = smooth_noise(x * 2.2, y * 2.2, seed=8)[:, None]
    plaster = PLASTER * (1 + 0.07 * rough + 0.09 * stain)
    albedo = np.where(on_tile[:, None], tile, np.where(tiled[:, None], grout, plaster))
    bent = normals.copy()
    bevel = np.clip((border - 0.455) / 0.03, 0, 1) * on_tile
    across = np.abs(u) > np.abs(v)
    bent[:, 0] += np.where(across, np.sign(u), 0) * bevel * 0.55
    bent[:, 1] += np.where(across, 0, np.sign(v)) * bevel * 0.55
    wave = np.where(on_tile, 0.020, np.where(tiled, 0.14, 0.10)).astype(np.float32)
    scale = np.where(on_tile, 14, 70).astype(np.float32)
    bent[:, 0] += wave * smooth_noise(x * scale, y * scale, seed=21, octaves=2) + 0.03 * on_tile * (own[:, 0] - 0.5)
    bent[:, 1] += wave * smooth_noise(x * scale, y * scale, seed=22, octaves=2)
    gloss = np.where(on_tile, 1.0, 0.03).astype(np.float32)
    return Surface(_bounded(albedo), _unit(bent), gloss, np.where(on_tile, 0.035, 0.5).astype(np.float32))


def _bench(points: Rays, normals: Rays) -> Surface:
    x, z = points[:, 0], points[:, 2]
    dark = wood(x, z)[:, None]
    albedo = WOOD_LIGHT * (1 - dark) + WOOD_DARK * dark
    bent = normals.copy()
    bent[:, 2] += 0.05 * smooth_noise(x * 12, z * 300, seed=31, octaves=2)
    return Surface(_bounded(albedo), _unit(bent), np.full(len(x), 0.25, np.float32), np.full(len(x), 0.22, np.float32))


def _glazed(points: Rays, normals: Rays, vessel: Vessel, glaze: int) -> Surface:
    angle = np.arctan2(points[:, 2] - vessel.z, points[:, 0] - vessel.x).astype(np.float32)
    height = points[:, 1]
    around = angle * np.float32(vessel.radius)
    run = smooth_noise(around * 16, height * 5, seed=40 + glaze)[:, None]
    speck = (smooth_noise(around * 240, height * 240, seed=60 + glaze, octaves=2) > 0.48)[:, None]
    edge = np.clip((height - (vessel.rim - 0.016)) / 0.012, 0, 1)[:, None]
    foot = np.clip((0.022 + 0.008 * run[:, 0] - height) / 0.003, 0, 1)[:, None]
    colour = GLAZES[glaze] * (1 + 0.22 * run)
    colour = colour * (1 - 0.45 * speck) * (1 + 0.35 * edge) + edge * np.float32(0.05)
    clay = np.array([0.42, 0.235, 0.14], np.float32) * (1 + 0.15 * run)
    albedo = colour * (1 - foot) + clay * foot
    bent = normals.copy()
    ridge = 0.035 * np.sin(height * 520 + run[:, 0] * 3)
    bent[:, 1] += ridge + 0.02 * run[:, 0]
    gloss = (1 - 0.97 * foot[:, 0]).astype(np.float32)
    return Surface(_bounded(albedo), _unit(bent), gloss, np.full(len(height), 0.045, np.float32))


def _bounded(albedo: Rays) -> Rays:
    return np.clip(albedo, 0.005, 0.9).astype(np.float32)


def _unit(vectors: Rays) -> Rays:
    return (vectors / np.sqrt(dot(vectors, vectors))[:, None]).astype(np.float32)
