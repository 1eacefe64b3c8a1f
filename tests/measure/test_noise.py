"""The noise floor: two takes of a scene are below it, another light or another scene is not."""

from __future__ import annotations

import numpy as np
import pytest
from skimage import data

from hueferry.measure.cost import sliced_w2
from hueferry.measure.noise import NoiseFloor, floor_of_blocks, judge, noise_floor
from hueferry.palettes.blocks import Blocks
from hueferry.palettes.build import palette_of
from hueferry.picture import Picture
from palettes.coded import Coded

CAT, CUP = Picture(data.chelsea(), Coded()), Picture(data.coffee(), Coded())


def test_the_same_seed_gives_the_same_floor() -> None:
    assert noise_floor(CAT, resamples=10) == noise_floor(CAT, resamples=10)
    assert noise_floor(CAT, resamples=10) != noise_floor(CAT, resamples=10, seed=1)


def test_chance_explains_less_than_the_variety_of_a_photograph() -> None:
    floor = noise_floor(CAT, resamples=30)

    assert 0 < floor.sampling < 0.5 < floor.within < floor.split_half


def test_chance_shrinks_with_the_root_of_the_pixels() -> None:
    """Sixteen times the pixels in the same proportions: a quarter of the distance between random halves."""
    counts = np.random.default_rng(0).integers(20, 60, (16, 24))
    colours = np.random.default_rng(1).normal([0.6, 0, 0], 0.05, (24, 3))

    few, many = (floor_of_blocks(Blocks(colours, n * counts), resamples=200) for n in (1, 16))

    assert many.sampling == pytest.approx(few.sampling / 4, rel=0.2)


def test_blocks_that_are_all_alike_leave_only_chance() -> None:
    counts = np.tile(np.arange(1, 25) * 1000, (16, 1))
    colours = np.random.default_rng(1).normal([0.6, 0, 0], 0.05, (24, 3))

    floor = floor_of_blocks(Blocks(colours, counts), resamples=20)

    assert floor.within == pytest.approx(0, abs=1e-9)
    assert floor.split_half == pytest.approx(0, abs=1e-9)
    assert floor.sampling > 0


def test_two_thinned_takes_of_one_scene_differ_by_no_more_than_the_scene_within_itself() -> None:
    takes = [Picture(np.ascontiguousarray(data.coffee()[start::2]), Coded()) for start in (0, 1)]
    difference = sliced_w2(*(palette_of(take) for take in takes))

    verdict = judge(difference, *(noise_floor(take, resamples=30) for take in takes))

    assert not verdict.more_than_within
    assert "no more than" in verdict.sentence


def test_another_scene_is_more_than_noise() -> None:
    difference = sliced_w2(palette_of(CAT), palette_of(CUP))

    verdict = judge(difference, noise_floor(CAT, resamples=30), noise_floor(CUP, resamples=30))

    assert verdict.more_than_sampling
    assert verdict.more_than_within
    assert f"{difference:.1f} ΔE*ab: more than parts" in verdict.sentence


def test_a_difference_between_the_floors_is_more_than_chance_only() -> None:
    floor = NoiseFloor(sampling=0.5, split_half=4.0, within=3.0, blocks=64, resamples=100)

    verdict = judge(2.0, floor, floor)

    assert (verdict.more_than_sampling, verdict.more_than_within) == (True, False)


@pytest.mark.parametrize(
    "pixels", [np.full((1, 1, 3), 90), np.full((7, 9, 3), 90), np.zeros((7, 9, 3)), np.eye(3)[None] * 200]
)
def test_pictures_of_almost_nothing_have_a_floor(pixels) -> None:
    floor = noise_floor(Picture(pixels.astype(np.uint8), Coded()), resamples=5)

    assert all(np.isfinite(value) for value in (floor.sampling, floor.split_half, floor.within))
    assert not judge(0.0, floor, floor).more_than_sampling


def test_ten_gigapixels_are_halved_as_well() -> None:
    counts = np.full((16, 24), 25_000_000, dtype=np.int64)
    colours = np.random.default_rng(1).normal([0.6, 0, 0], 0.05, (24, 3))

    assert floor_of_blocks(Blocks(colours, counts), resamples=3).sampling < 0.01
