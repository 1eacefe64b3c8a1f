"""Reduction: few colours that keep the moments and state their error."""

from __future__ import annotations

import itertools
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from skimage import data
from sklearn.datasets import load_sample_images

from hueferry.colour.spaces import oklab_to_linear_srgb, xyz_to_oklab
from hueferry.colour.transfer import linear_to_srgb
from hueferry.errors import InputError
from hueferry.maps.gaussian import fit_gaussian
from hueferry.palettes.build import palette_of
from hueferry.palettes.count import count
from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import reduce
from hueferry.picture import Picture
from palettes.coded import Coded

PICTURES = {
    "temple": load_sample_images().images[0],
    "flower": load_sample_images().images[1],
    "cat": data.chelsea(),
    "cup": data.coffee(),
}


def all_colours(pixels: np.ndarray) -> np.ndarray:
    """Oklab of every pixel that is not clipped in all channels: what the palette stands for."""
    codes = pixels.reshape(-1, 3)
    kept = codes[~((codes == 0).all(axis=1) | (codes == 255).all(axis=1))]
    return xyz_to_oklab(Coded().to_xyz(kept / 255))


@pytest.mark.parametrize("name", PICTURES)
def test_moments_are_those_of_all_pixels(name: str) -> None:
    """Truth: Oklab of every pixel. Plain averaging would lose the squared spread (law of total variance)."""
    picture = Picture(PICTURES[name], Coded())
    pixels = all_colours(PICTURES[name])

    palette = palette_of(picture)

    covariance = np.cov(pixels.T, bias=True)
    assert palette.mean == pytest.approx(pixels.mean(axis=0), abs=2e-4)
    deviation = np.sqrt(np.diag(covariance))
    assert palette.covariance / np.outer(deviation, deviation) == pytest.approx(np.corrcoef(pixels.T), abs=0.01)
    assert np.linalg.eigvalsh(palette.covariance) == pytest.approx(np.linalg.eigvalsh(covariance), rel=0.02)


@pytest.mark.parametrize("name", PICTURES)
def test_the_stated_spread_is_that_of_all_pixels_to_their_colour(name: str) -> None:
    """Truth: every pixel to its nearest colour, by SciPy's tree; the stated spread is never below it by rounding."""
    from scipy.spatial import cKDTree

    palette = palette_of(Picture(PICTURES[name], Coded()))
    distance, _ = cKDTree(palette.colours).query(all_colours(PICTURES[name]))

    nearest = float(np.sqrt((distance**2).mean()))
    assert 0.97 * nearest <= palette.spread <= 1.15 * nearest
    assert palette.spread < 0.011


def test_grouping_is_no_worse_than_a_k_means_of_another_library() -> None:
    """scikit-learn's k-means, 64 colours: variance-minimising cuts come within a quarter of it."""
    from sklearn.cluster import KMeans

    picture = Picture(PICTURES["cup"], Coded())
    sample = all_colours(PICTURES["cup"])[::40]
    best = KMeans(64, n_init=1, random_state=0).fit(sample)

    assert palette_of(picture, size=64).spread < 1.25 * np.sqrt(best.inertia_ / len(sample))


def codes_of(colours: np.ndarray) -> np.ndarray:
    return np.clip(linear_to_srgb(oklab_to_linear_srgb(colours)), 0, 1)


@pytest.mark.parametrize(("source", "target"), list(itertools.permutations(PICTURES, 2)))
def test_a_map_from_palettes_is_the_map_from_all_pixels(source: str, target: str) -> None:
    """The Gaussian map (Pitié & Kokaram 2007) of palettes and of all pixels: 99 % of pixels within one code of 255."""
    reduced = fit_gaussian(*(palette_of(Picture(PICTURES[name], Coded())) for name in (source, target)))
    pixels = [all_colours(PICTURES[name]) for name in (source, target)]
    full = fit_gaussian(*(Palette(colours, np.full(len(colours), 1 / len(colours))) for colours in pixels))
    seen = pixels[0][::37]

    difference = np.abs(codes_of(reduced(seen)) - codes_of(full(seen))).max(axis=1)

    assert np.quantile(difference, 0.99) < 1 / 255


def test_sparse_palettes_are_not_stretched_out_of_shape() -> None:
    """Two colours cannot hold what a photograph varies: they stay within a tenth of where the means are."""
    palette = palette_of(Picture(PICTURES["cup"], Coded()), size=2)
    wide = palette_of(Picture(PICTURES["cup"], Coded()))

    assert np.trace(palette.covariance) < np.trace(wide.covariance)


def test_the_palette_is_the_same_for_any_strips_and_threads() -> None:
    picture = Picture(PICTURES["flower"], Coded())

    one = palette_of(picture, threads=1)
    other = reduce(count(picture, strip_rows=7, threads=3), picture.encoding)

    assert one.colours.tobytes() == other.colours.tobytes()
    assert one.weights.tobytes() == other.weights.tobytes()


_DIGEST = """
import hashlib, sys
import numpy as np
from palettes.coded import Coded
from hueferry.palettes.build import palette_of
from hueferry.picture import Picture
pixels = np.random.default_rng(0).normal(120, 60, (900, 900, 3)).clip(0, 255).astype(np.uint8)
palette = palette_of(Picture(pixels, Coded()))
print(hashlib.sha256(palette.colours.tobytes() + palette.weights.tobytes()).hexdigest())
"""


def test_the_palette_is_the_same_for_any_number_of_blas_threads() -> None:
    digests = set()
    for threads in ("1", "2", "3"):
        limits = {"OPENBLAS_NUM_THREADS": threads, "OMP_NUM_THREADS": threads, "MKL_NUM_THREADS": threads}
        tests = str(Path(__file__).parents[1])
        run = subprocess.run(
            [sys.executable, "-c", _DIGEST],
            env=os.environ | limits | {"PYTHONPATH": tests},
            capture_output=True,
            check=True,
        )
        digests.add(run.stdout)

    assert len(digests) == 1


@pytest.mark.parametrize("border", [0, 255])
def test_a_clipped_border_changes_nothing(border: int) -> None:
    inner = PICTURES["cat"]
    framed = np.full((inner.shape[0], 2 * inner.shape[1], 3), border, np.uint8)
    framed[:, : inner.shape[1]] = inner

    plain, bordered = (palette_of(Picture(pixels, Coded())) for pixels in (inner, framed))

    assert plain.colours.tobytes() == bordered.colours.tobytes()


def test_transparent_and_masked_pixels_change_nothing() -> None:
    inner = PICTURES["cat"]
    wide = np.concatenate([inner, np.full_like(inner, 90)], axis=1)
    alpha = np.zeros((*wide.shape[:2], 1), np.uint8)
    alpha[:, : inner.shape[1]] = 255

    plain = palette_of(Picture(inner, Coded()))
    holed = palette_of(Picture(np.concatenate([wide, alpha], axis=2), Coded()))
    masked = palette_of(Picture(wide, Coded()), mask=alpha[..., 0] > 0)

    assert plain.colours.tobytes() == holed.colours.tobytes() == masked.colours.tobytes()


@pytest.mark.parametrize("value", [0, 7, 255])
def test_a_flat_picture_is_one_colour(value: int) -> None:
    palette = palette_of(Picture(np.full((5, 6, 3), value, np.uint8), Coded()))

    assert len(palette) == 1
    assert palette.colours[0] == pytest.approx(xyz_to_oklab(Coded().to_xyz(np.full((1, 3), value / 255)))[0], abs=1e-12)
    assert palette.spread == pytest.approx(0, abs=1e-12)


def test_two_colours_stay_two_colours_with_their_shares() -> None:
    pixels = np.full((10, 10, 3), (200, 40, 30), np.uint8)
    pixels[:3] = (20, 60, 140)

    palette = palette_of(Picture(pixels, Coded()))

    assert sorted(palette.weights) == pytest.approx([0.3, 0.7], abs=1e-12)
    assert len(palette) == 2


def test_gray_pictures_lie_on_the_neutral_axis() -> None:
    palette = palette_of(Picture(PICTURES["cat"][..., :1].copy(), Coded()))

    assert np.abs(palette.colours[:, 1:]).max() < 1e-6


def test_light_counted_as_light_keeps_its_shadows() -> None:
    """The same scene as linear 16-bit light and as 8-bit curved codes: palettes agree in mean and deviation."""
    codes = PICTURES["temple"] / 255
    light = np.rint(np.where(codes <= 0.04045, codes / 12.92, ((codes + 0.055) / 1.055) ** 2.4) * 65535)

    curved = palette_of(Picture(PICTURES["temple"], Coded()))
    linear = palette_of(Picture(light.astype(np.uint16), Coded(curved=False), bits=16))

    assert linear.mean == pytest.approx(curved.mean, abs=1e-3)
    assert linear.spread < 1.3 * curved.spread
    assert linear.covariance == pytest.approx(curved.covariance, abs=3e-4)


def test_an_empty_mask_is_refused() -> None:
    with pytest.raises(InputError, match="no pixel was counted"):
        palette_of(Picture(PICTURES["cat"], Coded()), mask=np.zeros(PICTURES["cat"].shape[:2], bool))


def test_a_palette_without_room_is_refused() -> None:
    with pytest.raises(InputError, match="at least 1"):
        palette_of(Picture(PICTURES["cat"], Coded()), size=0)


@pytest.mark.parametrize("size", [1, 2, 3, 7, 200, 1024])
def test_a_palette_never_has_more_colours_than_asked_for(size: int) -> None:
    assert len(palette_of(Picture(PICTURES["cat"], Coded()), size=size)) <= size
