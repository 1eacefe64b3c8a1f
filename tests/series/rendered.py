"""Rendered series with a known truth: one scene, changing framing, a known cast a frame."""

from __future__ import annotations

from functools import lru_cache

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import oklab_to_xyz, xyz_to_lab, xyz_to_oklab
from hueferry.maps.protocol import Map
from hueferry.picture import Metadata, Picture
from hueferry.samples.camera import Exposure, Light, lit, photograph
from hueferry.samples.photographs import HERO
from hueferry.samples.render import Framing, Layers, render_layers
from hueferry.series.views import View, view_of

SIZE = (140, 210)
GRAIN = 0.35


@attrs.frozen(eq=False)
class Shot:
    """A frame: as taken, and as it would have been under the hero's exposure; (height, width, 3) codes 0 … 1."""

    name: str
    taken: NDArray[np.float64]
    wanted: NDArray[np.float64]

    @property
    def view(self) -> View:
        """What the series keeps of it."""
        return view_of(picture_of(self.taken), self.name)


def picture_of(codes: NDArray[np.float64]) -> Picture:
    """Round codes to an 8-bit sRGB picture."""
    return Picture(np.rint(255 * codes).astype(np.uint8), SRGB, Metadata(format="png"), bits=8)


@lru_cache(maxsize=128)
def layers(seed: int, index: int) -> Layers:
    """Render the scene in a framing that wanders with the index."""
    rng = np.random.default_rng([seed, index])
    phase = 2 * np.pi * (index / 24 + seed / 7)
    framing = Framing(
        x=float(rng.normal(0, 0.02)), pan=float(9 * np.sin(phase) + rng.normal(0, 1)),
        tilt=float(-7 + 2 * np.cos(phase) + rng.normal(0, 0.7)), roll=float(rng.normal(0, 0.8)),
        field=float(rng.uniform(33, 44)),
    )  # fmt: skip
    return render_layers(framing, SIZE, samples=1, seed=index)


def cast(rng: np.random.Generator) -> Exposure:
    """Draw exposure, white balance and chroma as far apart as real frames are."""
    gains = np.exp(rng.normal(0, 0.10, 3))
    gains /= gains.prod() ** (1 / 3)
    red, green, blue = (float(gain) for gain in gains)
    return Exposure(float(rng.uniform(-0.6, 0.5)), (red, green, blue), float(rng.uniform(0.85, 1.15)))


def shoot(seed: int, count: int = 24) -> list[Shot]:
    """Take a series; the first frame has the hero's exposure and is the reference."""
    shots = []
    for index in range(count):
        rng = np.random.default_rng([seed, index, 1])
        scene = lit(layers(seed, index), HERO.light)
        exposure = cast(rng) if index else HERO.exposure
        shots.append(
            Shot(
                f"frame-{index}.jpg",
                photograph(scene, exposure, grain=GRAIN, seed=index),
                photograph(scene, HERO.exposure, grain=GRAIN, seed=index),
            )
        )
    return shots


def picture_oklab(codes: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the (n, 3) Oklab colours of the picture that these codes make."""
    return xyz_to_oklab(SRGB.to_xyz(picture_of(codes).pixels.reshape(-1, 3) / 255))


def error(shot: Shot, map_: Map | None = None) -> float:
    """Mean ΔE00 between the frame through the map, inside sRGB, and what it should be."""
    oklab = picture_oklab(shot.taken)
    carried = oklab if map_ is None else map_(oklab)
    inside = SRGB.to_xyz(np.clip(SRGB.from_xyz(oklab_to_xyz(carried)), 0, 1))
    wanted = SRGB.to_xyz(shot.wanted.reshape(-1, 3))
    return float(delta_e_2000(xyz_to_lab(inside), xyz_to_lab(wanted)).mean())


def sunset(seed: int, *, ramp: float, count: int = 24) -> tuple[list[Shot], list[View]]:
    """Take a time-lapse: flicker of exposure and white balance over light that falls linearly by the share `ramp`."""
    scene, shots, views = render_layers(Framing(), SIZE, samples=1, seed=1), [], []
    for index in range(count):
        rng = np.random.default_rng([seed, index])
        gone = ramp * index / (count - 1)
        red, green, blue = 1 - gone, 1 - 1.2 * gone, 1 - 1.5 * gone
        light = Light((1.2 * red, 1.0 * green, 0.85 * blue), (red, 0.97 * green, 0.92 * blue))
        gains = tuple(float(gain) for gain in np.exp(rng.normal(0, 0.04, 3)))
        flicker = Exposure(float(rng.normal(0, 0.12)), (gains[0], gains[1], gains[2]))
        linear, name = lit(scene, light), f"{index}.png"
        taken, wanted = (photograph(linear, one, grain=GRAIN, seed=index) for one in (flicker, Exposure()))
        shots.append(Shot(name, taken, wanted))
        views.append(view_of(picture_of(taken), name, taken=60.0 * index))
    return shots, views
