"""The engine: the NumPy definition as its oracle, the identity bit for bit, and independence of windows and threads."""

from __future__ import annotations

from pathlib import Path

import attrs
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hueferry.applying.engine import Engine, apply_table, apply_windows
from hueferry.arrays import Pixels
from hueferry.errors import InputError
from hueferry.picture import Metadata, Picture, Window
from hueferry.tables.build import build_table
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table
from tables.encodings import Display, Light

KINDS = [(np.uint8, 8), (np.uint16, 16), (np.uint16, 12), (np.uint16, 10), (np.uint16, 14), (np.float32, 32)]


def top_code(dtype: type, bits: int) -> float:
    return 1.0 if dtype is np.float32 else 2.0**bits - 1


def random_pixels(dtype: type, bits: int, channels: int, height: int = 37, width: int = 53) -> Pixels:
    values = np.random.default_rng(channels).random((height, width, channels)) * top_code(dtype, bits)
    return (values if dtype is np.float32 else np.rint(values)).astype(dtype)


def wild_table(size: int = 17) -> Table:
    even = np.linspace(0, 1, size)
    nodes = np.stack(np.meshgrid(even, even, even, indexing="ij"), axis=-1)
    return Table(1.2 * nodes - 0.1 + np.random.default_rng(0).normal(0, 0.03, nodes.shape))


@pytest.mark.parametrize(("dtype", "bits"), KINDS)
@pytest.mark.parametrize("channels", [3, 4])
def test_the_engine_reads_a_table_as_its_definition_does(dtype: type, bits: int, channels: int) -> None:
    pixels = random_pixels(dtype, bits, channels)
    top = top_code(dtype, bits)
    table = wild_table()

    found = apply_table(table, Picture(pixels, Display(), bits=bits)).pixels.astype(np.float64)

    wanted = look_up(table, pixels[:, :, :3] / top)
    if dtype is np.float32:
        assert found[:, :, :3] == pytest.approx(wanted, abs=1e-6)
    else:
        wanted = np.rint(np.clip(wanted, 0, 1) * top)
        assert np.abs(found[:, :, :3] - wanted).max() <= 1
        assert (found[:, :, :3] != wanted).mean() < 0.01  # ties that single and double precision break differently
    assert np.array_equal(found[:, :, 3:], pixels[:, :, 3:])


@pytest.mark.parametrize(("dtype", "bits"), KINDS[:5])
@pytest.mark.parametrize("size", [2, 33, 65, 129])
def test_no_change_is_bit_exact_on_every_integer_code(dtype: type, bits: int, size: int) -> None:
    ramp = np.arange(2**bits).astype(dtype)
    pixels = np.stack([ramp, ramp[::-1], np.roll(ramp, 77), ramp], axis=-1)[None]

    table = build_table(lambda colours: colours, Display(), size=size)

    assert np.array_equal(apply_table(table, Picture(pixels, Display(), bits=bits)).pixels, pixels)


def test_no_change_is_bit_exact_on_16_bit_codes_behind_input_curves() -> None:
    ramp = np.arange(65536).astype(np.uint16)
    pixels = np.stack([ramp, ramp[::-1], np.roll(ramp, 77)], axis=-1)[None]

    table = build_table(lambda colours: colours, Light())

    assert table.curves is not None
    assert np.array_equal(apply_table(table, Picture(pixels, Light(), bits=16)).pixels, pixels)


@pytest.mark.parametrize(("dtype", "bits"), KINDS)
@pytest.mark.parametrize("channels", [1, 2, 3, 4])
def test_windows_of_any_size_and_any_number_of_threads_give_the_same_bytes(
    dtype: type, bits: int, channels: int
) -> None:
    picture = Picture(random_pixels(dtype, bits, channels, 300, 1100), Display(), bits=bits)
    engine = Engine(wild_table(), dtype, bits, encoding=Display(), dither=True)
    whole = apply_table(wild_table(), picture, dither=True, threads=1).pixels

    pieces = np.empty_like(whole)
    for top in range(0, 300, 77):
        for left in range(0, 1100, 301):
            window = np.s_[top : top + 77, left : left + 301]
            engine.apply(picture.pixels[window], pieces[window], top=top, left=left)

    assert pieces.tobytes() == whole.tobytes()
    assert apply_table(wild_table(), picture, dither=True, threads=4).pixels.tobytes() == whole.tobytes()


@attrs.define(eq=False)
class Sink:
    pixels: Pixels
    closed: bool = False

    def write(self, window: Window, pixels: Pixels) -> None:
        rows = slice(window.top, window.top + window.height)
        self.pixels[rows, window.left : window.left + window.width] = pixels

    def close(self) -> Path:
        self.closed = True
        return Path("made")


@settings(max_examples=12, deadline=None)
@given(rows=st.integers(1, 40), threads=st.integers(1, 3))
def test_window_by_window_is_the_same_as_all_at_once(rows: int, threads: int) -> None:
    picture = Picture(random_pixels(np.uint8, 8, 3), Display())
    sink = Sink(np.zeros_like(picture.pixels))

    path = apply_windows(wild_table(), picture, sink, rows=rows, threads=threads)

    assert path == Path("made")
    assert sink.closed
    assert np.array_equal(sink.pixels, apply_table(wild_table(), picture).pixels)


def test_the_picture_keeps_its_metadata_and_its_own_pixels() -> None:
    pixels = random_pixels(np.uint8, 8, 3)
    before = pixels.copy()
    picture = Picture(pixels, Display(), Metadata(format="tiff", exif=b"II*\0"), notes=("a note",))

    found = apply_table(wild_table(), picture)

    assert (found.metadata, found.notes, found.bits) == (picture.metadata, picture.notes, 8)
    assert np.array_equal(picture.pixels, before)


def test_alpha_of_any_float_bits_is_untouched() -> None:
    pixels = random_pixels(np.float32, 32, 4)
    pixels[0, :4, 3] = [np.nan, np.inf, -0.0, 1e-42]

    found = apply_table(wild_table(), Picture(pixels, Display(), bits=32)).pixels

    assert np.array_equal(found[:, :, 3].view(np.uint32), pixels[:, :, 3].view(np.uint32))


def test_pixels_that_are_not_finite_stay_and_do_not_spread() -> None:
    pixels = random_pixels(np.float32, 32, 3)
    clean = apply_table(wild_table(), Picture(pixels, Display(), bits=32)).pixels
    spoiled = pixels.copy()
    spoiled[3, 4] = [np.nan, 0.5, 0.5]
    spoiled[5, 6] = [0.25, np.inf, -np.inf]

    found = apply_table(wild_table(), Picture(spoiled, Display(), bits=32)).pixels

    assert np.array_equal(found[3, 4], spoiled[3, 4], equal_nan=True)
    assert np.array_equal(found[5, 6], spoiled[5, 6])
    rest = np.ones(pixels.shape[:2], dtype=bool)
    rest[[3, 5], [4, 6]] = False
    assert np.array_equal(found[rest], clean[rest])


def test_floats_beyond_the_range_keep_the_shift_of_the_border() -> None:
    even = np.linspace(0, 1, 2)
    nodes = np.stack(np.meshgrid(even, even, even, indexing="ij"), axis=-1)
    table = Table(0.5 * nodes + 0.1)
    pixels = np.array([[[2.0, 0.5, -0.25], [1.0, 0.5, 0.0]]], dtype=np.float32)

    found = apply_table(table, Picture(pixels, Display(), bits=32)).pixels

    assert found[0, 1] == pytest.approx([0.6, 0.35, 0.1], abs=1e-6)
    assert found[0, 0] == pytest.approx([0.6 + 1.0, 0.35, 0.1 - 0.25], abs=1e-6)


def test_gray_stays_gray_at_the_luminance_the_table_gives() -> None:
    """sRGB red has 22.2 % of white's luminance relative to D50 (IEC 61966-2-1, Bradford): gray code 0.5085."""
    even = np.linspace(0, 1, 2)
    nodes = np.stack(np.meshgrid(even, even, even, indexing="ij"), axis=-1)
    pixels = np.array([[[255, 7], [0, 9]]], dtype=np.uint8)

    found = apply_table(Table(nodes * [1, 0, 0]), Picture(pixels, Display())).pixels

    assert found[0, 0].tolist() == [round(255 * 0.5085), 7]
    assert found[0, 1].tolist() == [0, 9]


@pytest.mark.parametrize(("dtype", "bits"), KINDS)
def test_no_change_leaves_gray_pictures_bit_for_bit(dtype: type, bits: int) -> None:
    pixels = random_pixels(dtype, bits, 2)

    found = apply_table(build_table(lambda c: c, Display()), Picture(pixels, Display(), bits=bits)).pixels

    assert found == pytest.approx(pixels, abs=0 if dtype is not np.float32 else 2e-7)


def test_dithered_results_average_to_the_level_between_codes() -> None:
    """The mean over a neighbourhood shows the level that rounding to the nearest code loses."""
    table = Table(np.full((2, 2, 2, 3), 100.3 / 255))
    picture = Picture(np.full((64, 64, 3), 128, dtype=np.uint8), Display())

    plain, dithered = apply_table(table, picture).pixels, apply_table(table, picture, dither=True).pixels

    assert (plain == 100).all()
    assert set(np.unique(dithered)) == {100, 101}
    assert dithered.mean() == pytest.approx(100.3, abs=0.01)


def test_pixels_of_another_kind_are_refused() -> None:
    with pytest.raises(InputError, match="takes uint8 pixels, not uint16"):
        Engine(wild_table(), np.uint8, 8).apply(np.zeros((2, 2, 3), dtype=np.uint16))
    with pytest.raises(InputError, match="not float64"):
        Engine(wild_table(), np.float64, 8)
    with pytest.raises(InputError, match="need an encoding"):
        Engine(wild_table(), np.uint8, 8).apply(np.zeros((2, 2, 1), dtype=np.uint8))
