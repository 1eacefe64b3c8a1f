"""Stained sections with known stain amounts, and the known changes of stain and scanner of the slide benchmark."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import attrs
import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from hueferry.colour.encoding import SRGB
from hueferry.slides.codecs import Packing
from hueferry.slides.tiff_writer import TILE, Layout, SlideForm, TiffOptions, write_tiff_slide

Planes = NDArray[np.float64]
Pixels8 = NDArray[np.uint8]

PITCH = (0.5, 0.5)
"""Micrometres a pixel."""

# Ruifrok & Johnston (2001), unit rows: haematoxylin, eosin, DAB.
HED = np.array([[0.65, 0.70, 0.29], [0.07, 0.99, 0.11], [0.27, 0.57, 0.78]])
HED /= np.linalg.norm(HED, axis=1, keepdims=True)


def amounts(seed: int, *, height: int = 384, width: int = 512) -> Planes:
    """Return (height, width, 2) amounts of two stains: nuclei that crowd to one side, fibres, and bare glass."""
    rng = np.random.default_rng(seed)

    def field(size: float) -> Planes:
        plane = ndimage.gaussian_filter(rng.normal(size=(height, width)), size, mode="wrap")
        return plane / plane.std()

    outline = ndimage.gaussian_filter((field(40) > -0.7).astype(float), 2)
    crowd = field(60) + np.linspace(-0.8, 0.8, width)[None, :] * rng.choice([-1, 1])
    nuclei = ndimage.gaussian_filter((field(3) > 1.5 - 0.45 * crowd).astype(float), 0.8)
    fibres = np.clip(0.35 + 0.12 * field(2) + 0.18 * field(20), 0.03, None)
    first = 0.08 * np.exp(0.3 * field(10)) + nuclei * 0.75 * np.exp(0.25 * field(4))
    second = fibres * (1 - 0.7 * nuclei)
    return np.stack([first, second], axis=2) * outline[..., None]


def rendered(seed: int, vectors: Planes = HED[:2], glass: float = 0.95, **shape: int) -> Pixels8:
    """Return an 8-bit section with a little scanner noise."""
    rng = np.random.default_rng([seed, 1])
    density = amounts(seed, **shape) @ vectors
    codes = glass * 10**-density + rng.normal(0, 0.006, density.shape)
    return np.asarray(np.rint(255 * np.clip(codes, 0, 1)), dtype=np.uint8)


@attrs.frozen(eq=False)
class Restained:
    """Another staining run and another scanner: amounts, vectors, glass, and a power a channel, in encoded values."""

    basis: Planes
    factors: Planes
    turned: Planes
    glass: Planes
    powers: Planes
    white: Planes

    def __call__(self, pixels: Pixels8) -> Pixels8:
        density = -np.log10(np.maximum(pixels / 255.0, 0.25 / 255) / self.white)
        amounts_ = density @ np.linalg.inv(self.basis)
        carried = amounts_ * np.append(self.factors, 1.0) @ np.vstack([self.turned, self.basis[2]])
        codes = (self.white * self.glass * 10**-carried) ** self.powers
        return np.asarray(np.rint(255 * np.clip(codes, 0, 1)), dtype=np.uint8)


def restain(rng: np.random.Generator, stains: tuple[int, int], white: float) -> Restained:
    """Draw amounts × log-normal(σ 0.2), vectors turned by up to 0.12, glass lowered by up to 8 %, powers (σ 0.06)."""
    pair = HED[list(stains)]
    normal = np.cross(pair[0], pair[1])
    turned = pair + rng.uniform(-0.12, 0.12, (2, 3))
    turned /= np.linalg.norm(turned, axis=1, keepdims=True)
    return Restained(
        np.vstack([pair, normal / np.linalg.norm(normal)]),
        np.exp(rng.normal(0, 0.2, 2)),
        turned,
        1 - rng.uniform(0, 0.08, 3),
        np.exp(rng.normal(0, 0.06, 3)),
        np.full(3, white),
    )


def bands_of(pixels: Pixels8) -> Iterator[Pixels8]:
    """Cut pixels into bands, as slides are written."""
    return (pixels[top : top + TILE] for top in range(0, pixels.shape[0], TILE))


def save_slide(path: Path, pixels: Pixels8) -> Path:
    """Write a pyramid without loss."""
    form = SlideForm(pixels.shape[:2], pixels.dtype, SRGB, PITCH)
    options = TiffOptions(layout=Layout.FLAT, packing=Packing.DEFLATE)
    return write_tiff_slide(path, bands_of(pixels), form, options=options)
