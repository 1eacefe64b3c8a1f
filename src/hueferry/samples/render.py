"""Rays through the sample scene: what the window lights, and what the room gives back, apart from each other.

Light adds up. Rendered once for a framing, the two parts give the picture under any colour of window and room.
"""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.samples.scene import SHAPES, VESSELS, Surface, surface_of
from hueferry.samples.shapes import FAR, Line, Rays, dot

WINDOW_X = -2.6
WINDOW_Y = (0.55, 2.35)
WINDOW_Z = (0.35, 2.35)
WINDOW_CELLS = 2
"""The window is sampled on a grid of so many cells a side; every ray takes a point of its own in each."""

DOOR_Z, DOOR_X, DOOR_Y = 4.2, (-0.9, 0.5), (0.9, 2.3)
"""A bright doorway behind the camera, seen only as a sheen in the glaze."""

_STRIP = 120_000


@attrs.frozen
class Framing:
    """Where the camera stands and looks; metres and degrees.

    Attributes:
        x, y, z: the camera.
        pan: to the right.
        tilt: up.
        roll: clockwise.
        field: horizontal angle of view.
    """

    x: float = 0.0
    y: float = 0.74
    z: float = 2.75
    pan: float = 0.0
    tilt: float = -6.5
    roll: float = 0.0
    field: float = 42.0


@attrs.frozen(eq=False)
class Layers:
    """Scene-linear light of a framing, for a white window and a white room of unit strength.

    Attributes:
        window: (height, width, 3) float32, by the window: soft shadows and mirror images.
        room: (height, width, 3) float32, by walls and ceiling.
    """

    window: NDArray[np.float32]
    room: NDArray[np.float32]


def render_layers(framing: Framing, size: tuple[int, int], *, samples: int = 4, seed: int = 0) -> Layers:
    """Render a framing.

    Args:
        framing: the camera.
        size: rows and columns.
        samples: rays a pixel, a square number.
        seed: of the places that rays take inside their pixel and on the window.
    """
    rng = np.random.default_rng(seed)
    rows, columns = size
    window, room = np.zeros((rows, columns, 3), np.float32), np.zeros((rows, columns, 3), np.float32)
    side = round(samples**0.5)
    strip = max(1, _STRIP // columns)
    for top in range(0, rows, strip):
        band = slice(top, min(top + strip, rows))
        for sub in range(side * side):
            origins, directions = _rays(framing, size, band, (sub // side, sub % side, side), rng)
            lit, given = _shade(origins, directions, rng)
            window[band] += lit.reshape(-1, columns, 3) / np.float32(side * side)
            room[band] += given.reshape(-1, columns, 3) / np.float32(side * side)
    return Layers(window, room)


def _rays(
    framing: Framing, size: tuple[int, int], band: slice, cell: tuple[int, int, int], rng: np.random.Generator
) -> tuple[Rays, Rays]:
    rows, columns = size
    down, across, side = cell
    y, x = np.mgrid[band, 0:columns].astype(np.float32)
    jitter = rng.random((2, *x.shape), dtype=np.float32)
    reach = np.float32(np.tan(np.radians(framing.field / 2)))
    u = ((x + (across + jitter[0]) / side) / columns * 2 - 1) * reach
    v = (1 - (y + (down + jitter[1]) / side) / rows * 2) * reach * np.float32(rows / columns)
    ahead = np.stack([u, v, -np.ones_like(u)], axis=-1).reshape(-1, 3)
    directions = (ahead @ _turn(framing).T).astype(np.float32)
    directions /= np.sqrt(dot(directions, directions))[:, None]
    origins = np.broadcast_to(np.array([framing.x, framing.y, framing.z], np.float32), directions.shape)
    return origins, directions


def _turn(framing: Framing) -> NDArray[np.float32]:
    pan, tilt, roll = (np.radians(angle) for angle in (framing.pan, framing.tilt, framing.roll))
    about_y = np.array([[np.cos(pan), 0, -np.sin(pan)], [0, 1, 0], [np.sin(pan), 0, np.cos(pan)]])
    about_x = np.array([[1, 0, 0], [0, np.cos(tilt), -np.sin(tilt)], [0, np.sin(tilt), np.cos(tilt)]])
    about_z = np.array([[np.cos(roll), np.sin(roll), 0], [-np.sin(roll), np.cos(roll), 0], [0, 0, 1]])
    return np.asarray(about_y @ about_x @ about_z, dtype=np.float32)


def _shade(origins: Rays, directions: Rays, rng: np.random.Generator) -> tuple[Rays, Rays]:
    index, distance = _nearest(origins, directions)
    points = origins + directions * np.minimum(distance, 50)[:, None]
    window, room = np.zeros_like(points), np.full_like(points, 0.05)
    for shape in range(len(SHAPES)):
        met = np.flatnonzero((index == shape) & (distance < FAR))
        if not len(met):
            continue
        here, seen = points[met], directions[met]
        smooth = SHAPES[shape].normal(here, seen)
        surface = surface_of(shape, here, smooth)
        open_sky = _openness(here, smooth, shape)
        window[met] = _by_window(here, seen, smooth, surface, rng)
        room[met] = _by_room(here, seen, surface, open_sky)
    return window, room


def _nearest(origins: Rays, directions: Rays) -> tuple[NDArray[np.intp], Line]:
    distances = np.stack([shape.meet(origins, directions) for shape in SHAPES])
    index = distances.argmin(axis=0)
    return index, distances[index, np.arange(len(index))]


def _by_window(here: Rays, seen: Rays, smooth: Rays, surface: Surface, rng: np.random.Generator) -> Rays:
    """Diffuse light of the window through its visible part, and its mirror image in the glaze."""
    start = here + smooth * np.float32(2e-3)
    total = np.zeros(len(here), np.float32)
    for cell in range(WINDOW_CELLS**2):
        target = _on_window(len(here), cell, rng)
        to = target - start
        distance = np.sqrt(dot(to, to))
        to /= distance[:, None]
        facing = np.maximum(dot(surface.normals, to), 0) * (dot(smooth, to) > 0)
        leaving = np.maximum(-to[:, 0], 0)
        lit = facing > 0
        visible = np.zeros(len(here), np.float32)
        visible[lit] = _visible(start[lit], to[lit], distance[lit])
        total += facing * leaving * visible / distance**2
    area = (WINDOW_Y[1] - WINDOW_Y[0]) * (WINDOW_Z[1] - WINDOW_Z[0])
    diffuse = surface.albedo * (total * np.float32(area / np.pi / WINDOW_CELLS**2 * 9))[:, None]
    return diffuse + _mirrored_window(start, seen, surface)[:, None]


def _on_window(count: int, cell: int, rng: np.random.Generator) -> Rays:
    place = rng.random((2, count), dtype=np.float32)
    row, column = divmod(cell, WINDOW_CELLS)
    y = WINDOW_Y[0] + (row + place[0]) / WINDOW_CELLS * (WINDOW_Y[1] - WINDOW_Y[0])
    z = WINDOW_Z[0] + (column + place[1]) / WINDOW_CELLS * (WINDOW_Z[1] - WINDOW_Z[0])
    return np.stack([np.full_like(y, WINDOW_X), y, z], axis=1)


def _visible(start: Rays, to: Rays, distance: Line) -> Line:
    blocked = np.zeros(len(start), dtype=bool)
    for vessel, _ in VESSELS:
        blocked |= vessel.meet(start, to) < distance
    return (~blocked).astype(np.float32)


def _mirrored_window(start: Rays, seen: Rays, surface: Surface) -> Line:
    """Image of the window's four panes in the glaze, blurred by its roughness."""
    back = _mirror(seen, surface.normals)
    t = np.where(back[:, 0] < -1e-3, (WINDOW_X - start[:, 0]) / np.minimum(back[:, 0], -1e-3), 0)
    blur = np.maximum(surface.roughness * np.maximum(t, 0.1), 0.01)
    panes = np.zeros(len(start), np.float32)
    for low_y, high_y in _halves(WINDOW_Y):
        for low_z, high_z in _halves(WINDOW_Z):
            panes += _soft(start[:, 1] + t * back[:, 1], low_y, high_y, blur) * _soft(
                start[:, 2] + t * back[:, 2], low_z, high_z, blur
            )
    seen_pane = np.where(t > 0, panes, 0) * surface.gloss
    bright = seen_pane > 0.01
    visible = np.ones(len(start), np.float32)
    visible[bright] = _visible(start[bright], back[bright], t[bright])
    return (seen_pane * visible * _fresnel(seen, surface.normals) * np.float32(7)).astype(np.float32)


def _halves(span: tuple[float, float]) -> tuple[tuple[float, float], tuple[float, float]]:
    middle, bar = sum(span) / 2, 0.05
    return (span[0], middle - bar), (middle + bar, span[1])


def _soft(value: Line, low: float, high: float, blur: Line) -> Line:
    return np.asarray(
        np.clip((value - low) / blur + 0.5, 0, 1) * np.clip((high - value) / blur + 0.5, 0, 1), dtype=np.float32
    )


def _by_room(here: Rays, seen: Rays, surface: Surface, open_sky: Line) -> Rays:
    """Light of ceiling and walls, less what the vessels cover, and the room's dim image in the glaze."""
    up = 0.62 + 0.38 * surface.normals[:, 1]
    # In a hollow light bounces once more off the glaze and takes on its colour (Jimenez et al. 2016, in spirit).
    tint = surface.albedo ** (1 + 0.5 * (1 - open_sky[:, None]))
    diffuse = tint * (0.24 * up * open_sky)[:, None]
    back = _mirror(seen, surface.normals)
    t = np.where(back[:, 2] > 1e-2, (DOOR_Z - here[:, 2]) / np.maximum(back[:, 2], 1e-2), 0)
    blur = np.maximum(surface.roughness * t, 0.05).astype(np.float32) + np.float32(0.2)
    door = _soft(here[:, 0] + t * back[:, 0], *DOOR_X, blur) * _soft(here[:, 1] + t * back[:, 1], *DOOR_Y, blur)
    room = 1.1 * door * (t > 0) + 0.10 + 0.22 * np.clip(back[:, 1], 0, 1) + 0.05 * np.clip(back[:, 2], 0, 1)
    image = room * _fresnel(seen, surface.normals) * surface.gloss * (0.35 + 0.65 * open_sky)
    return np.asarray(diffuse + image[:, None], dtype=np.float32)


def _openness(here: Rays, smooth: Rays, shape: int) -> Line:
    open_sky = np.ones(len(here), np.float32)
    for number, (vessel, _) in enumerate(VESSELS):
        if number + 2 != shape:
            open_sky *= 1 - 0.85 * vessel.shade_of(here, smooth)
            continue
        inward = (smooth[:, 0] * (vessel.x - here[:, 0]) + smooth[:, 2] * (vessel.z - here[:, 2])) > 0
        depth = np.clip((vessel.rim - here[:, 1]) / (vessel.rim + 1e-3), 0, 1)
        open_sky *= np.where(inward & (here[:, 1] < vessel.rim - 2e-3), 1 - 0.72 * depth, 1).astype(np.float32)
    if shape != 1:  # the bench, and the wall for what stands before it, take light away near the corner
        open_sky *= (1 - 0.45 * np.exp(-here[:, 1] / 0.05)).astype(np.float32)
    if shape == 1:
        open_sky *= (1 - 0.5 * np.exp(-here[:, 2] / 0.07)).astype(np.float32)
    return open_sky


def _mirror(seen: Rays, normals: Rays) -> Rays:
    return np.asarray(seen - 2 * dot(seen, normals)[:, None] * normals, dtype=np.float32)


def _fresnel(seen: Rays, normals: Rays) -> Line:
    """Return the mirrored share for a glaze of index 1.6 (Schlick 1994)."""
    cosine = np.clip(-dot(seen, normals), 0, 1)
    return np.asarray(0.053 + 0.947 * (1 - cosine) ** 5, dtype=np.float32)
