"""Known changes of camera and light, the `G` of the benchmark."""

from __future__ import annotations

from typing import Protocol

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.spaces import (
    lab_to_xyz,
    linear_srgb_to_oklab,
    oklab_to_linear_srgb,
    oklab_to_xyz,
    xyz_to_lab,
    xyz_to_oklab,
)
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear

Pixels8 = NDArray[np.uint8]
Planes = NDArray[np.float64]


class Change(Protocol):
    """Pixels to pixels, the same for every pixel of a picture."""

    def __call__(self, pixels: Pixels8) -> Pixels8:
        """Render (…, 3) sRGB pixels anew, clipped to sRGB and rounded to 8 bit."""
        ...


@attrs.frozen(eq=False)
class Grade:
    """A change in scene-linear light, then a rendering.

    Attributes:
        stops: exposure.
        gains: (3,) white balance gains, geometric mean 1.
        knee: linear light above which highlights are rolled off, per channel.
        power: exponent of Oklab lightness.
        chroma: factor of Oklab chroma.
        turn: hue turn in radians.
    """

    stops: float
    gains: Planes
    knee: float
    power: float
    chroma: float
    turn: float

    def __call__(self, pixels: Pixels8) -> Pixels8:
        """Render (…, 3) sRGB pixels anew, clipped to sRGB and rounded to 8 bit."""
        light = _roll_off(srgb_to_linear(pixels / 255.0) * (2.0**self.stops * self.gains), self.knee)
        lab = linear_srgb_to_oklab(light)
        lightness = np.maximum(lab[..., 0], 0.0) ** self.power
        rendered = np.concatenate([lightness[..., None], _turned(lab[..., 1:], self.chroma, self.turn)], axis=-1)
        return _encoded(oklab_to_linear_srgb(rendered))


@attrs.frozen(eq=False)
class ForeignGrade:
    """The same knobs on another camera, to see whether a method was made for `Grade` alone.

    The roll-off follows the brightest channel and keeps hue, the power acts on CIELAB lightness, chroma and hue turn in
    CIELAB, and a curve of its own bends each channel's codes.
    """

    knobs: Grade
    bends: Planes

    def __call__(self, pixels: Pixels8) -> Pixels8:
        """Render (…, 3) sRGB pixels anew, clipped to sRGB and rounded to 8 bit."""
        knobs = self.knobs
        light = srgb_to_linear(pixels / 255.0) * (2.0**knobs.stops * knobs.gains)
        peak = np.maximum(light.max(axis=-1, keepdims=True), 1e-6)
        light = light * _roll_off(peak, knobs.knee) / peak
        lab = xyz_to_lab(oklab_to_xyz(linear_srgb_to_oklab(light)))
        lightness = 100 * (np.maximum(lab[..., :1], 0.0) / 100) ** knobs.power
        rendered = np.concatenate([lightness, _turned(lab[..., 1:], knobs.chroma, knobs.turn)], axis=-1)
        codes = np.clip(linear_to_srgb(oklab_to_linear_srgb(xyz_to_oklab(lab_to_xyz(rendered)))), 0, 1)
        bent = codes + self.bends * np.sin(2 * np.pi * codes) / (2 * np.pi)
        return np.asarray(np.rint(np.clip(bent, 0, 1) * 255), dtype=np.uint8)


def draw_grade(rng: np.random.Generator) -> Grade:
    """Draw a grade: ±0.7 EV, gains σ 0.12, knee 0.6 … 0.95, power 0.8 … 1.2, chroma 0.65 … 1.35, turn σ 0.08 rad."""
    log_gains = rng.normal(0.0, 0.12, 3)
    return Grade(
        stops=rng.uniform(-0.7, 0.7),
        gains=np.exp(log_gains - log_gains.mean()),
        knee=rng.uniform(0.6, 0.95),
        power=rng.uniform(0.8, 1.2),
        chroma=rng.uniform(0.65, 1.35),
        turn=rng.normal(0.0, 0.08),
    )


def draw_foreign_grade(rng: np.random.Generator) -> ForeignGrade:
    """Draw the same knobs for the other camera, and a bend of up to 25 % contrast a channel, mostly in common."""
    return ForeignGrade(draw_grade(rng), rng.uniform(-0.2, 0.2) + rng.uniform(-0.05, 0.05, 3))


def _roll_off(light: Planes, knee: float) -> Planes:
    over = np.maximum(light - knee, 0.0) / (1 - knee)
    return np.where(light > knee, knee + (1 - knee) * (1 - np.exp(-over)), light)


def _turned(plane: Planes, factor: float, turn: float) -> Planes:
    matrix = np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])
    return np.asarray(factor * plane @ matrix)


def _encoded(light: Planes) -> Pixels8:
    return np.asarray(np.rint(np.clip(linear_to_srgb(light), 0, 1) * 255), dtype=np.uint8)
