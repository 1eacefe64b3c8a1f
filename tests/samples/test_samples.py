"""The sample pictures: rendered the same every time, with truth, profile and EXIF, and never flat."""

from __future__ import annotations

from pathlib import Path

import attrs
import numpy as np
import pytest
from PIL import Image

from hueferry.samples.camera import photograph
from hueferry.samples.photographs import FRAMES, HERO, develop, layers_of, under_hero_light
from hueferry.samples.sections import RUNS, SCANNERS, render_section, stain_amounts

FOLDER = Path(__file__).parents[2] / "sample_images"
SMALL = (67, 100)


def test_the_same_frame_is_rendered_the_same() -> None:
    first, second = (develop(FRAMES[0], layers_of(FRAMES[0], size=SMALL, samples=1)) for _ in range(2))

    np.testing.assert_array_equal(first, second)


def test_the_truth_is_the_same_framing_in_the_heros_light() -> None:
    frame = FRAMES[3]
    layers = layers_of(frame, size=SMALL, samples=1)

    truth = develop(under_hero_light(frame), layers, grain=0)
    again = develop(attrs.evolve(HERO, framing=frame.framing), layers, grain=0)

    np.testing.assert_array_equal(truth, again)
    assert np.abs(truth - develop(frame, layers, grain=0)).mean() > 0.02


def test_a_stop_more_is_twice_the_light() -> None:
    """Common practice, no source: exposure is a factor in scene-linear light."""
    light = np.full((2, 2, 3), 0.01, np.float32)

    one, two = photograph(2 * light, HERO.exposure), photograph(light, attrs.evolve(HERO.exposure, stops=1.0))

    np.testing.assert_allclose(one, two, atol=1e-7)


@pytest.mark.parametrize("name", ["hero", *(f"bench-{number}" for number in range(1, 7))])
def test_the_committed_photographs_are_what_they_should_be(name: str) -> None:
    with Image.open(FOLDER / f"{name}.jpg") as image:
        exif, pixels = image.getexif(), np.asarray(image).astype(float)

        assert image.size == (1600, 1067)
        assert image.info["icc_profile"]
        assert exif[0x0110] == "Marrowfield field camera"
        assert exif.get_ifd(0x8769)[0x829A]
    blocks = pixels[:1024, :1600].reshape(32, 32, 50, 32, 3).std(axis=(1, 3)).mean(axis=2)
    assert np.median(blocks) > 4  # texture in most places
    assert pixels.std(axis=(0, 1)).min() > 25  # and contrast over the whole


def test_the_deep_picture_is_deep() -> None:
    import tifffile

    pixels = tifffile.imread(FOLDER / "bench-7-deep.tif")

    assert pixels.dtype == np.uint16
    assert len(np.unique(pixels[:, :, 1])) > 5000


def test_the_samples_stay_small() -> None:
    assert sum(path.stat().st_size for path in FOLDER.rglob("*") if path.is_file()) < 9e6


def test_sections_differ_by_stain_and_scanner_alone() -> None:
    red, green = stain_amounts(1, side=160)
    one, two = render_section("run-a", "scanner-1", side=160), render_section("run-b", "scanner-2", side=160)

    assert set(RUNS) == {"run-a", "run-b"}
    assert set(SCANNERS) == {"scanner-1", "scanner-2"}
    assert red.min() >= 0
    assert green.min() >= 0
    bare = (red + green) == 0
    assert bare.mean() > 0.2
    assert np.abs(one[bare].mean(axis=0) - 255 * np.array(SCANNERS["scanner-1"].glass)).max() < 1
    assert np.abs(one.astype(float) - two).mean() > 5
