"""Thin sections of plant stems from the materials laboratory of Marrowfield Tileworks: two staining runs, two scanners.

The same tissue is rendered under either run and scanner, so the truth is known. Stains and scanners are invented: a red
one that lignin takes up, and a blue-green one that cellulose takes up.
"""

from __future__ import annotations

from pathlib import Path

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.samples.texture import hashed, smooth_noise

Field = NDArray[np.float32]

SIDE = 720


@attrs.frozen
class Staining:
    """A staining run: densities of red and blue-green per unit of stain, in red, green and blue."""

    red: tuple[float, float, float]
    green: tuple[float, float, float]
    strength: tuple[float, float]


@attrs.frozen
class Scanner:
    """A scanner: the code of bare glass in each channel, and a power of its tone curve."""

    glass: tuple[float, float, float]
    power: float


RUNS = {
    "run-a": Staining((0.14, 0.82, 0.55), (0.86, 0.30, 0.40), (1.0, 1.0)),
    "run-b": Staining((0.22, 0.80, 0.50), (0.80, 0.38, 0.45), (0.72, 1.25)),
}
SCANNERS = {
    "scanner-1": Scanner((0.955, 0.955, 0.945), 1.0),
    "scanner-2": Scanner((0.90, 0.925, 0.955), 1.12),
}


def stain_amounts(seed: int, *, side: int = SIDE) -> tuple[Field, Field]:
    """Return the amounts of the red and the blue-green stain, (side, side) each, of one section.

    A stem in cross section: epidermis, cortex, a ring of vascular bundles with vessels, pith.
    """
    y, x = np.mgrid[-1.15 : 1.15 : side * 1j, -1.15 : 1.15 : side * 1j].astype(np.float32)
    angle = np.arctan2(y, x)
    radius = np.hypot(x, y) * (1 + 0.03 * np.sin(5 * angle + seed) + 0.02 * smooth_noise(x * 3, y * 3, seed=seed))
    inside = (radius < 1).astype(np.float32)
    size = np.where(radius < 0.55, 0.062, 0.036).astype(np.float32)
    wall = np.maximum(_walls(x, y, 0.062, seed) * (radius < 0.55), _walls(x, y, 0.036, seed + 9) * (radius >= 0.55))
    count = 13
    turn = angle * count / (2 * np.pi) + 0.13 * seed
    along = (turn - np.round(turn)) * 2 * np.pi / count * radius
    bundle = np.exp(-((along / 0.085) ** 2) - ((radius - 0.72) / 0.10) ** 2)
    xylem = np.clip(bundle * 2.2 - 0.75, 0, 1) * (radius < 0.74)
    phloem = np.clip(bundle * 2.2 - 0.75, 0, 1) * (radius >= 0.74)
    vessels = _walls(x, y, 0.021, seed + 4)
    skin = np.exp(-(((radius - 0.975) / 0.018) ** 2))
    grain = 1 + 0.10 * smooth_noise(x * 40, y * 40, seed=seed + 2) + 0.12 * smooth_noise(x * 4, y * 4, seed=seed + 3)
    red = (0.95 * xylem * (0.35 + vessels) + 0.65 * skin + 0.05 * wall) * grain
    green = (0.75 * wall * (size > 0) * (1 - xylem) + 0.80 * phloem * (0.3 + vessels) + 0.05) * grain
    return np.asarray(red * inside, np.float32), np.asarray(green * inside, np.float32)


def render_section(run: str, scanner: str, *, seed: int = 1, side: int = SIDE) -> NDArray[np.uint8]:
    """Render one section as a scanner sees it: (side, side, 3) 8-bit codes.

    Args:
        run: "run-a" or "run-b".
        scanner: "scanner-1" or "scanner-2".
        seed: of the tissue; the same seed, the same tissue.
        side: pixels.
    """
    staining, device = RUNS[run], SCANNERS[scanner]
    red, green = stain_amounts(seed, side=side)
    density = (staining.strength[0] * red)[..., None] * np.array(staining.red)
    density = density + (staining.strength[1] * green)[..., None] * np.array(staining.green)
    codes = (np.array(device.glass) * 10**-density) ** device.power
    noise = np.random.default_rng([seed, len(scanner)]).normal(0, 0.004, codes.shape)
    return np.asarray(np.rint(255 * np.clip(codes + noise, 0, 1)), dtype=np.uint8)


def render_sections(folder: Path) -> list[Path]:
    """Write the same section twice, run A on scanner 1 and run B on scanner 2, and another section of run B."""
    from PIL import Image

    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for name, run, scanner, seed in (
        ("stem-1-reference", "run-a", "scanner-1", 1),
        ("stem-1-restained", "run-b", "scanner-2", 1),
        ("stem-2-restained", "run-b", "scanner-2", 2),
    ):
        path = folder / f"{name}.png"
        Image.fromarray(render_section(run, scanner, seed=seed)).save(path, optimize=True)
        written.append(path)
    return written


def _walls(x: Field, y: Field, size: float, seed: int) -> Field:
    """Return 1 on the walls of irregular cells of about `size`, falling to 0 inside (Worley 1996)."""
    u, v = x / np.float32(size), y / np.float32(size)
    i, j = np.floor(u).astype(np.int64), np.floor(v).astype(np.int64)
    first, second = np.full_like(u, 9.0), np.full_like(u, 9.0)
    for di in (-1, 0, 1):
        for dj in (-1, 0, 1):
            px = i + di + 0.15 + 0.7 * hashed(i + di, j + dj, seed)
            py = j + dj + 0.15 + 0.7 * hashed(i + di, j + dj, seed + 1)
            distance = np.hypot(u - px, v - py).astype(np.float32)
            second = np.minimum(second, np.maximum(first, distance))
            first = np.minimum(first, distance)
    return np.asarray(np.clip(1 - (second - first) / np.float32(0.16), 0, 1) ** 0.8, dtype=np.float32)
