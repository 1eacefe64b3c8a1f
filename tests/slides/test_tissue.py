"""Glass, tissue, ink and dust on sections whose parts are known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import ndimage

from hueferry.slides.glass import find_glass
from hueferry.slides.refuse import amount_is_measured, reason_against
from hueferry.slides.tissue import find_tissue
from slides.sections import HED, amounts, rendered

GLASSES = {"clean": (0.95, 0.95, 0.95), "tinted": (0.93, 0.88, 0.80), "gray": (0.74, 0.74, 0.74)}


def noisy(codes: np.ndarray, seed: int = 0) -> np.ndarray:
    rng = np.random.default_rng(seed)
    return np.rint(255 * np.clip(codes + rng.normal(0, 0.006, codes.shape), 0, 1)) / 255


def section(glass: np.ndarray, seed: int = 1) -> np.ndarray:
    return noisy(glass * 10 ** -(amounts(seed) @ HED[:2]))


@pytest.mark.parametrize("glass", GLASSES.values(), ids=GLASSES.keys())
def test_glass_is_found_within_two_codes_whatever_its_colour(glass: tuple[float, ...]) -> None:
    found = find_glass(section(np.array(glass)))

    assert found.seen
    assert 255 * np.abs(found.white - glass).max() <= 2


def test_shaded_glass_is_followed_and_not_taken_for_tissue() -> None:
    x = np.linspace(-1, 1, 512)[None, :, None]
    shade = (0.93 * (1 - 0.12 * x**2)) * np.ones((384, 512, 3))
    codes = section(shade)
    bare = ndimage.binary_erosion(amounts(1).sum(axis=2) < 1e-3, iterations=3)

    regions = find_tissue(codes)

    assert 255 * np.abs(regions.glass.shading - shade)[bare].mean() < 3
    assert regions.tissue[bare].mean() < 0.02


def test_pale_tissue_is_found() -> None:
    """Optical density 0.05 in each channel on average, on 8-bit glass with scanner noise."""
    rng = np.random.default_rng(3)
    disc = np.hypot(*np.mgrid[-1:1:300j, -1:1:400j]) < 0.6
    texture = 0.05 * (1 + 0.2 * ndimage.gaussian_filter(rng.normal(size=disc.shape), 2) * 7)
    density = (disc * texture)[..., None] * np.array([0.6, 1.5, 0.9])

    found = find_tissue(noisy(0.94 * 10**-density)).tissue

    assert found[disc].mean() >= 0.9
    assert found[~ndimage.binary_dilation(disc, iterations=4)].mean() < 0.01


def test_stained_tissue_is_found_and_glass_is_not() -> None:
    truth = amounts(1).sum(axis=2)

    found = find_tissue(section(np.full(3, 0.95))).tissue

    assert found[truth > 0.2].mean() > 0.97
    assert found[truth < 1e-3].mean() < 0.03


@pytest.mark.parametrize(
    "ink",
    [(0.1, 0.15, 0.5), (0.05, 0.45, 0.2), (0.8, 0.1, 0.12), (0.05, 0.05, 0.06)],
    ids=["blue", "green", "red", "black"],
)
def test_pen_marks_are_not_tissue(ink: tuple[float, ...]) -> None:
    codes = np.full((384, 512, 3), 0.95)
    codes[60:200, 100:300] = section(np.full(3, 0.95))[60:200, 100:300]
    codes[250:330, 60:420] = ink
    codes = noisy(ndimage.gaussian_filter(codes, (0.7, 0.7, 0)))

    regions = find_tissue(codes)

    assert regions.tissue[245:335, 55:425].mean() < 0.02
    assert regions.pen[255:325, 65:415].mean() > 0.95


def test_coverslip_edges_and_dust_are_not_tissue() -> None:
    codes = np.full((384, 512, 3), 0.95)
    codes[:, 40:42] = 0.6
    codes[300:302, :] = 0.6
    rng = np.random.default_rng(2)
    for y, x in rng.integers(5, 290, (30, 2)):
        codes[y : y + 3, x + 60 : x + 63] = 0.2

    assert find_tissue(noisy(codes)).tissue.mean() < 0.001


def test_black_outside_the_scanned_area_is_padding() -> None:
    codes = section(np.full(3, 0.95))
    framed = np.zeros((484, 712, 3))
    framed[50:434, 100:612] = codes

    regions = find_tissue(framed)

    assert regions.padding[:50].all()
    assert regions.padding.mean() == pytest.approx(1 - 384 * 512 / (484 * 712), abs=0.005)
    assert 255 * np.abs(regions.glass.white - 0.95).max() <= 2


def test_a_mask_limits_tissue() -> None:
    mask = np.zeros((384, 512), dtype=bool)
    mask[:, :100] = True

    assert not find_tissue(section(np.full(3, 0.95)), mask=mask).tissue[:, 100:].any()


def test_haze_is_seen() -> None:
    sharp = rendered(4) / 255
    blurred = ndimage.gaussian_filter(sharp, (4, 4, 0))

    assert find_tissue(blurred).sharpness < 0.6 * find_tissue(sharp).sharpness


def test_bright_field_is_not_refused() -> None:
    codes = section(np.full(3, 0.95))

    assert reason_against(codes, find_tissue(codes)) is None


def test_fluorescence_is_refused() -> None:
    rng = np.random.default_rng(0)
    spots = ndimage.gaussian_filter((rng.random((300, 300)) > 0.995).astype(float), 2)
    codes = noisy(np.clip(np.stack([0.02 + 0 * spots, 0.03 + 8 * spots, 0.04 + 5 * spots], axis=2), 0, 1))

    assert "fluorescence" in str(reason_against(codes, find_tissue(codes)))


def test_colourless_slides_are_refused() -> None:
    gray = np.repeat(section(np.full(3, 0.8))[:, :, 1:2], 3, axis=2)

    assert "no colour" in str(reason_against(gray, find_tissue(gray)))


def test_black_slides_are_refused() -> None:
    black = np.zeros((64, 64, 3))

    assert "every pixel is black" in str(reason_against(black, find_tissue(black)))


def test_brown_stains_are_recognised_as_measurements() -> None:
    brown = amounts(5).reshape(-1, 2) @ HED[[0, 2]] * np.array([1, 1, 1])
    pink = amounts(5).reshape(-1, 2) @ HED[:2]

    assert amount_is_measured(brown)
    assert not amount_is_measured(pink)
