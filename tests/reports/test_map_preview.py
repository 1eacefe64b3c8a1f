"""The preview of a map: what it shows is what the map does, and the same map gives the same picture."""

from __future__ import annotations

import io

import numpy as np
import pytest
from PIL import Image

from hueferry.colour.encoding import LINEAR_SRGB, SRGB
from hueferry.colour.spaces import lab_to_oklab
from hueferry.files.canvas import Canvas
from hueferry.palettes.palette import Palette
from hueferry.reports.map_facts import (
    chart_codes,
    chart_shape,
    gray_gains,
    gray_ramp,
    moved_chart,
    moved_palette,
    shown,
)
from hueferry.reports.map_preview import draw_map
from hueferry.tables.build import sample_table
from hueferry.tables.table import Table

GAINS = np.array([0.8, 0.5, 1.2])


def scaled(gains: np.ndarray) -> Table:
    return sample_table(lambda codes: codes * gains, size=5)


def drawn(table: Table, palette: Palette | None = None) -> np.ndarray:
    data = draw_map(table, SRGB, title="map.clf", sentences=["no fold"], palette=palette)
    return np.asarray(Image.open(io.BytesIO(data)))


def test_gains_are_singular_values() -> None:
    """Of a diagonal matrix they are its numbers."""
    most, least = gray_gains(scaled(GAINS), gray_ramp(33))

    np.testing.assert_allclose(most, 1.2, atol=1e-5)
    np.testing.assert_allclose(least, 0.5, atol=1e-5)


@pytest.mark.parametrize("encoding", [SRGB, LINEAR_SRGB])
def test_the_chart_holds_grays_and_colours_of_every_hue(encoding: object) -> None:
    codes = chart_codes(encoding)
    rows, columns = chart_shape()

    assert codes.shape == (rows * columns, 3)
    assert ((codes >= 0) & (codes <= 1)).all()
    np.testing.assert_array_equal(np.ptp(codes[:columns], axis=1), 0)
    before, _ = moved_chart(scaled(GAINS), encoding).lab()
    chroma, hue = np.hypot(*before[columns:, 1:].T), np.degrees(np.arctan2(before[columns:, 2], before[columns:, 1]))
    assert chroma.min() > 5
    assert len(np.unique(np.floor(hue / 30))) == 12


def test_what_moves_is_clipped_like_pixels() -> None:
    moved = moved_chart(scaled(np.array([3.0, 1.0, 1.0])), SRGB)

    np.testing.assert_allclose(moved.after[:, 0], np.minimum(3 * moved.before[:, 0], 1), atol=1e-6)
    np.testing.assert_allclose(moved.after[:, 1:], moved.before[:, 1:], atol=1e-6)


def test_patches_show_before_above_after() -> None:
    """The last patch of the gray row is white: above the cut it stays so, below it is what white becomes."""
    picture = drawn(scaled(GAINS))
    height, width = picture.shape[:2]

    patch = picture[height - 48 - 470 + 84 : height - 48 - 24, width - 48 - 24 - 75 : width - 48 - 30][:60]
    colours = {tuple(pixel) for pixel in patch.reshape(-1, 3)}

    assert (255, 255, 255) in colours
    assert tuple(np.rint(255 * GAINS.clip(0, 1)).astype(int)) in colours


def test_the_palette_adds_a_row_of_its_own() -> None:
    rng = np.random.default_rng(1)
    colours = lab_to_oklab(rng.uniform([20, -30, -30], [90, 30, 30], (60, 3)))
    palette = Palette(colours, np.full(60, 1 / 60))
    plain, with_palette = drawn(scaled(GAINS)), drawn(scaled(GAINS), palette)
    moved = moved_palette(scaled(GAINS), palette, SRGB)

    assert with_palette.shape[0] > plain.shape[0]
    assert moved.weights.sum() == pytest.approx(1)
    seen = {tuple(pixel) for pixel in with_palette[plain.shape[0] - 48 :].reshape(-1, 3).tolist()}
    largest = int(moved.weights.argmax())
    for side in moved.shown():
        assert tuple(side[largest].tolist()) in seen


def test_the_same_map_gives_the_same_bytes() -> None:
    first, second = (draw_map(scaled(GAINS), SRGB, title="map.clf") for _ in range(2))

    assert first == second


def test_every_kind_of_map_can_be_drawn() -> None:
    """One that does nothing, one that leaves one colour, one that turns all around, one far beyond the range."""
    for function in (
        lambda codes: codes,
        lambda codes: np.full_like(codes, 0.3),
        lambda codes: 1 - codes,
        lambda codes: 50 * codes - 20,
    ):
        assert drawn(sample_table(function, size=3)).ndim == 3


def test_colours_of_other_encodings_are_shown_in_srgb() -> None:
    """Half of linear light is code 188 (IEC 61966-2-1)."""
    np.testing.assert_array_equal(shown(np.full((1, 3), 0.5), LINEAR_SRGB), [[188] * 3])


def test_names_of_any_letters_are_drawn() -> None:
    sheet = Canvas(200, 40, (255, 255, 255))
    sheet.words((5, 30), "日本 \u202e\x07 map…", (0, 0, 0), size=20)

    assert sheet.pixels().min() < 128


def test_a_canvas_draws_where_it_is_told() -> None:
    """Areas fill exactly, edges are averaged, and nothing else changes."""
    sheet = Canvas(40, 30, (255, 255, 255))
    sheet.box((10, 5), (8, 6), (0, 0, 0))
    sheet.dot((30, 20), 4, (255, 0, 0))
    sheet.strip((0, 28), (40, 2), np.array([[0, 0, 255], [0, 255, 0]], dtype=np.uint8))
    pixels = sheet.pixels()

    assert (pixels[5:11, 10:18] == 0).all()
    assert (pixels[5:11, 18:25] == 255).all()
    assert tuple(pixels[20, 30]) == (255, 0, 0)
    assert abs(float((pixels[14:27, 24:37, 1] < 128).sum()) - np.pi * 16) < 6
    assert tuple(pixels[29, 2]) == (0, 0, 255)
    assert tuple(pixels[29, 38]) == (0, 255, 0)
    assert sheet.png().startswith(b"\x89PNG")
