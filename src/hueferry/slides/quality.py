"""What a correction did to a slide: stains, amounts, costs, structure, glass; before and after."""

from __future__ import annotations

from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Pixels
from hueferry.colour.spaces import xyz_to_oklab
from hueferry.slides.look import Look
from hueferry.slides.reference import SlideReference
from hueferry.slides.register import FALLBACK
from hueferry.slides.stains import Stains, stains_of

_LEVELS = np.linspace(0.005, 0.995, 100)
_MOST = 1024


def describe_slide(look: Look) -> dict[str, Any]:
    """Return the figures of one slide as JSON values: glass, tissue, stains, focus."""
    stains = stains_of(look.density)
    return {
        "glass_codes": [round(255 * float(value), 2) for value in look.scale.glass],
        "glass_seen": look.regions.glass.seen,
        "glass_share": look.regions.glass.share,
        "tissue_share": look.regions.tissue_share,
        "pen_share": float(look.regions.pen.mean()),
        "sharpness": look.regions.sharpness,
        "hazy_share": look.regions.hazy,
        "stain_vectors": None if stains is None else stains.vectors.tolist(),
        "stain_angle_degrees": None if stains is None else stains.angle,
        "stain_amounts_99": None if stains is None else stains.strengths.tolist(),
        "mean_density": None if look.empty else look.density.mean(axis=0).tolist(),
    }


def stains_apart(first: Stains | None, second: Stains | None) -> list[float] | None:
    """Return the angle in degrees between either stain's vectors; None where one of them cannot be told."""
    if first is None or second is None:
        return None
    cosines = np.clip((first.vectors * second.vectors).sum(axis=1), -1.0, 1.0)
    return [float(angle) for angle in np.degrees(np.arccos(cosines))]


def density_cost(first: Colours, second: Colours) -> float:
    """Return the sliced W2 between two sets of densities, in optical density, over 32 fixed directions."""
    turns = np.arange(32) + 0.5
    height, around = 1 - turns / 32, np.pi * (1 + 5**0.5) * turns
    ring = np.sqrt(1 - height**2)
    directions = np.stack([ring * np.cos(around), ring * np.sin(around), height])
    one, two = (np.quantile(_fewer(density) @ directions, _LEVELS, axis=0) for density in (first, second))
    return float(np.sqrt(3 * ((one - two) ** 2).mean()))


def _fewer(density: Colours) -> Colours:
    return density[:: max(1, len(density) // 8192)]


def colour_cost(first: Look, reference: SlideReference) -> float:
    """Return the sliced W2 between the tissue of a slide and its reference, in RMS ΔE*ab (D50)."""
    from hueferry.measure.cost import sliced_w2
    from hueferry.palettes.palette import Palette
    from hueferry.palettes.reduce import thin

    palettes = []
    for codes, encoding in ((first.codes, first.scale.encoding), (reference.codes, reference.encoding)):
        chosen = codes[:: max(1, len(codes) // 8192)]
        colours = xyz_to_oklab(encoding.to_xyz(chosen))
        palettes.append(thin(Palette(colours, np.full(len(colours), 1 / len(colours))), _MOST))
    return sliced_w2(palettes[0], palettes[1])


def compare(before: Look, after: Look, reference: SlideReference) -> dict[str, Any]:
    """Return what changed, as JSON values.

    Args:
        before: the slide.
        after: the same slide corrected, looked at within the same tissue.
        reference: what it was brought towards.
    """
    encoding = before.scale.encoding
    target, goal = reference.scale(encoding), reference.sample(encoding).density
    drift = 255 * np.abs(after.scale.glass - target.glass)
    numbers: dict[str, Any] = {
        "before": describe_slide(before),
        "after": describe_slide(after),
        "glass_off_target_codes": float(drift.max()),
        "clipped_share": clipped_share(after.thumbnail, before),
        "stains_off_reference_degrees_before": stains_apart(stains_of(before.density), reference.stains),
        "stains_off_reference_degrees_after": stains_apart(stains_of(after.density), reference.stains),
    }
    if not before.empty and not after.empty:
        numbers |= {
            "cost_density_before": density_cost(before.density, goal),
            "cost_density_after": density_cost(after.density, goal),
            "cost_delta_e_before": colour_cost(before, reference),
            "cost_delta_e_after": colour_cost(after, reference),
            **structure_kept(before, after),
        }
    return numbers


def clipped_share(pixels: Pixels, look: Look) -> float:
    """Return the share of tissue with a channel at an end of its range."""
    tissue = pixels[look.regions.tissue]
    if len(tissue) == 0:
        return 0.0
    top = 1.0 if pixels.dtype == np.float32 else 2**look.bits - 1
    return float(((tissue <= 0) | (tissue >= top)).any(axis=1).mean())


def structure_kept(before: Look, after: Look) -> dict[str, float]:
    """Return SSIM and gradient correlation of the nuclear stain before and after; 1 is all kept.

    References:
        Wang, Bovik, Sheikh & Simoncelli (2004), Image quality assessment, IEEE TIP 13 (Gaussian window, σ 1.5).
    """
    planes = [_nuclear(look) for look in (before, after)]
    one, two = ((plane - plane.mean()) / max(float(plane.std()), 1e-6) for plane in planes)
    gradients = [np.stack(np.gradient(plane)).reshape(2, -1) for plane in (one, two)]
    correlation = np.corrcoef(gradients[0].ravel(), gradients[1].ravel())[0, 1] if one.std() and two.std() else 1.0
    tissue = before.regions.tissue
    return {"nuclear_ssim": float(_ssim(one, two)[tissue].mean()), "nuclear_gradient_correlation": float(correlation)}


def _nuclear(look: Look) -> NDArray[np.float64]:
    top = 1.0 if look.thumbnail.dtype == np.float32 else float(2**look.bits - 1)
    stains = stains_of(look.density)
    weights = np.linalg.pinv(FALLBACK if stains is None else stains.vectors)[:, 0]
    return np.stack([look.scale.of(row / top) @ weights for row in look.thumbnail])


def _ssim(one: NDArray[np.float64], two: NDArray[np.float64]) -> NDArray[np.float64]:
    from scipy.ndimage import gaussian_filter

    def smooth(plane: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray(gaussian_filter(plane, 1.5))

    spread = max(float(np.ptp(one)), float(np.ptp(two)), 1e-6)
    first, second = (0.01 * spread) ** 2, (0.03 * spread) ** 2
    mean_one, mean_two = smooth(one), smooth(two)
    variance = smooth(one**2) - mean_one**2 + smooth(two**2) - mean_two**2
    together = smooth(one * two) - mean_one * mean_two
    return np.asarray(
        (2 * mean_one * mean_two + first) * (2 * together + second)
        / ((mean_one**2 + mean_two**2 + first) * (variance + second))
    )  # fmt: skip


def within(look: Look, thumbnail: Pixels) -> Look:
    """Return a corrected thumbnail looked at where `look` has its tissue, on its own glass."""
    from hueferry.slides.density import Density

    top = 1.0 if thumbnail.dtype == np.float32 else float(2**look.bits - 1)
    rows, columns = np.nonzero(look.regions.tissue)
    step = max(1, -(-len(rows) // max(len(look.density), 1)))
    codes = thumbnail[rows[::step], columns[::step], :3].astype(np.float64) / top
    near = ~look.regions.tissue
    for channel, code in enumerate(look.scale.glass):
        near &= np.abs(look.thumbnail[:, :, channel] / top - code) < 2 / 255
    white = np.median(thumbnail[near], axis=0) if near.any() else np.percentile(thumbnail, 99.5, axis=(0, 1))
    white = white[:3] / top
    scale = Density(np.clip(white, 0.02, 1.0), look.scale.encoding, look.scale.light)
    return attrs.evolve(
        look, thumbnail=thumbnail[:, :, :3], scale=scale, codes=codes, density=scale.of(codes),
        blocks=look.blocks[: len(codes)],
    )  # fmt: skip


def overlay(look: Look) -> Pixels:
    """Return the thumbnail, 8 bit, with tissue outlined in green and ink in magenta; what is neither is paler."""
    from scipy.ndimage import binary_erosion

    top = 1.0 if look.thumbnail.dtype == np.float32 else float(2**look.bits - 1)
    shown = 255 * np.clip(look.thumbnail[:, :, :3].astype(np.float64) / top, 0, 1)
    shown[~look.regions.tissue] = 0.5 * shown[~look.regions.tissue] + 127
    for mask, colour in ((look.regions.tissue, (0, 140, 60)), (look.regions.pen, (200, 0, 160))):
        shown[mask & ~binary_erosion(mask, iterations=2)] = colour
    return np.asarray(np.rint(shown), dtype=np.uint8)
