"""Counting: exact, and the same for any window, order and thread."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hueferry.errors import InputError
from hueferry.palettes.cells import Cells, Spacing, spacing_of
from hueferry.palettes.count import count, count_pixels
from hueferry.palettes.histogram import Histogram
from hueferry.picture import Picture
from palettes.coded import Coded


def same(first: Histogram, second: Histogram) -> bool:
    arrays = all(np.array_equal(getattr(first, n), getattr(second, n)) for n in ("cells", "counts", "marginals"))
    rest = ("layout", "masked", "white", "black", "not_finite", "beyond")
    return arrays and all(getattr(first, n) == getattr(second, n) for n in rest)


def noise(seed: int, shape: tuple[int, int, int], dtype: str, bits: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    if dtype == "float32":
        steps = np.rint(rng.uniform(-0.1, 1.1, shape) * 65535) + rng.uniform(-0.4, 0.4, shape)
        return (steps / 65535).astype(np.float32)  # off the edges between steps, where rounding is free to differ
    top = 2**bits - 1
    values = np.clip(rng.normal(top / 2, top / 2, shape), 0, top)  # many clipped, in all channels and in some
    return np.rint(values).astype(dtype)


DEPTHS = [("uint8", 8), ("uint16", 10), ("uint16", 12), ("uint16", 16), ("float32", 16)]


@pytest.mark.parametrize(("dtype", "bits"), DEPTHS)
@pytest.mark.parametrize("channels", [1, 2, 3, 4])
def test_counts_are_those_of_counting_one_pixel_after_the_other(dtype: str, bits: int, channels: int) -> None:
    """Oracle: a plain loop in integers, by NumPy's unique."""
    pixels = noise(1, (37, 41, channels), dtype, bits)

    counted = count_pixels(pixels, bits)

    alpha = pixels[..., -1] if channels in (2, 4) else np.ones(pixels.shape[:2])
    codes = pixels[..., : channels - 1] if channels in (2, 4) else pixels
    if dtype == "float32":
        codes = np.floor(np.clip(codes.astype(np.float64), 0, 1) * 65535 + 0.5).astype(int)
    rows = np.broadcast_to(codes, (*codes.shape[:2], 3))[alpha > 0].astype(int)
    top = counted.layout.levels - 1
    white, black = (rows == top).all(axis=1), (rows == 0).all(axis=1)
    kept = rows[~white & ~black]
    assert (counted.white, counted.black) == (int(white.sum()), int(black.sum()))
    assert counted.masked == int((alpha <= 0).sum())
    assert counted.pixels == len(kept)
    for channel in range(3):
        expected = np.bincount(kept[:, channel], minlength=top + 1)
        assert np.array_equal(counted.marginals[channel], expected)
    number = np.searchsorted(counted.layout.starts, kept, side="right") - 1
    joint, counts = np.unique(number @ [counted.layout.side**2, counted.layout.side, 1], return_counts=True)
    assert np.array_equal(counted.cells, joint)
    assert np.array_equal(counted.counts, counts)


@settings(max_examples=40, deadline=None)
@given(rows=st.integers(1, 40), threads=st.integers(1, 4), depth=st.sampled_from(DEPTHS), seed=st.integers(0, 99))
def test_strips_and_threads_change_no_count(rows: int, threads: int, depth: tuple[str, int], seed: int) -> None:
    dtype, bits = depth
    picture = Picture(noise(seed, (40, 23, 3), dtype, bits), Coded(), bits=bits)
    mask = np.random.default_rng(seed).random((40, 23)) > 0.3

    assert same(count(picture, mask=mask), count(picture, mask=mask, strip_rows=rows, threads=threads))


@settings(max_examples=25, deadline=None)
@given(order=st.permutations(range(4)), depth=st.sampled_from(DEPTHS))
def test_windows_merged_in_any_order_are_the_picture(order: list[int], depth: tuple[str, int]) -> None:
    dtype, bits = depth
    pixels = noise(3, (40, 24, 3), dtype, bits)
    parts = [pixels[:17, :5], pixels[:17, 5:], pixels[17:, :11], pixels[17:, 11:]]

    merged = count_pixels(parts[order[0]], bits)
    for index in order[1:]:
        merged = merged.merge(count_pixels(parts[index], bits))

    assert same(merged, count_pixels(pixels, bits))


@pytest.mark.parametrize(("dtype", "bits"), DEPTHS)
def test_the_mean_of_the_cells_is_the_mean_of_the_pixels(dtype: str, bits: int) -> None:
    pixels = noise(5, (64, 64, 3), dtype, bits)
    counted = count_pixels(pixels, bits)
    top = counted.layout.levels - 1
    codes = np.clip(pixels.astype(float), 0, 1) * top if dtype == "float32" else pixels.astype(float)
    codes = np.floor(codes + 0.5)
    clipped = (codes == 0).all(axis=2) | (codes == top).all(axis=2)

    mean = counted.counts @ counted.codes() / counted.pixels

    assert mean == pytest.approx(codes[~clipped].mean(axis=0) / top, abs=1e-12)


def test_counts_stay_exact_beyond_what_float32_can_count() -> None:
    """2**24 + 1 is the first whole number that float32 cannot hold."""
    pixels = np.full((4097, 4100, 3), 77, np.uint8)
    pixels[0, 0] = (77, 78, 79)

    counted = count(Picture(pixels, Coded()), strip_rows=1000)

    assert counted.pixels == 4097 * 4100 > 2**24
    assert int(counted.marginals[0, 77]) == 4097 * 4100
    assert sorted(counted.counts) == [1, 4097 * 4100 - 1]


def test_pixels_that_are_no_numbers_are_counted_apart() -> None:
    pixels = np.full((2, 3, 3), 0.5, np.float32)
    pixels[0, 0, 1], pixels[0, 1, 0], pixels[0, 2, 2], pixels[1, 0, 0] = np.nan, np.inf, -np.inf, 1.5

    counted = count_pixels(pixels, 16)

    assert (counted.not_finite, counted.beyond, counted.pixels) == (3, 1, 3)


def test_codes_above_the_stated_depth_are_counted_at_its_edge() -> None:
    pixels = np.array([[[1023, 5, 5], [4000, 5, 5]]], np.uint16)

    counted = count_pixels(pixels, 10)

    assert (counted.beyond, int(counted.marginals[0, 1023])) == (1, 2)


def test_a_mask_of_another_shape_is_refused() -> None:
    with pytest.raises(InputError, match="the mask is"):
        count(Picture(np.zeros((4, 5, 3), np.uint8), Coded()), mask=np.ones((5, 4), bool))


def test_counts_of_different_depths_do_not_merge() -> None:
    first = count_pixels(np.full((2, 2, 3), 9, np.uint8), 8)
    second = count_pixels(np.full((2, 2, 3), 9, np.uint16), 16)

    with pytest.raises(InputError, match="do not add up"):
        first.merge(second)


@pytest.mark.parametrize("bits", range(1, 17))
@pytest.mark.parametrize("spacing", list(Spacing))
def test_cells_cover_every_code_once_and_clipped_codes_are_alone(bits: int, spacing: Spacing) -> None:
    layout = Cells(bits, spacing)

    held = np.bincount(layout.of_code(), minlength=layout.side)

    assert held.min() >= 1
    assert held.sum() == 2**bits
    assert (held[0], held[-1]) == (1, 1)
    assert layout.side <= 256


def test_codes_that_are_light_get_cells_that_follow_lightness() -> None:
    """A quarter of the code range is a quarter of the light there, and 5 % of it under the curve of IEC 61966-2-1."""
    assert spacing_of(Coded(curved=False)) is Spacing.LINEAR_LIGHT
    assert spacing_of(Coded(curved=True)) is Spacing.EVEN
    widths = np.diff(Cells(16, Spacing.LINEAR_LIGHT).starts)
    assert widths[1] == 1
    assert widths[-2] > 1000
