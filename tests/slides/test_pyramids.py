"""What is written is read back by three independent readers, and by ours."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import openslide
import pytest
import pyvips
import tifffile

from hueferry.colour.encoding import SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.colour.profile import read_profile
from hueferry.errors import InputError, OutputError, PictureError, RefusedError
from hueferry.picture import Window
from hueferry.slides.codecs import Packing
from hueferry.slides.levels import Halving, level_shapes
from hueferry.slides.tiff_reader import TiffSlide
from hueferry.slides.tiff_writer import TILE, Layout, SlideForm, TiffOptions, write_tiff_slide

SIZES = [(1, 1), (255, 256), (257, 255), (256, 257), (1, 4095), (4095, 257), (700, 1030)]
PITCH = (0.2527, 0.2531)


def pixels_of(shape: tuple[int, int], dtype: type = np.uint8, seed: int = 0) -> np.ndarray:
    """Smooth colours, so that JPEG keeps them, up to the very edge."""
    y, x = np.meshgrid(np.linspace(0, 3, shape[0]), np.linspace(0, 5, shape[1]), indexing="ij")
    plane = np.stack([0.6 + 0.3 * np.sin(x + seed), 0.6 + 0.3 * np.cos(y * 2), 0.6 + 0.3 * np.sin(x + y)], axis=2)
    top = 1.0 if dtype == np.float32 else np.iinfo(dtype).max
    return (plane * top).astype(dtype)


def save(path: Path, pixels: np.ndarray, pitch=PITCH, encoding=SRGB, **options) -> Path:
    bands = (pixels[top : top + TILE] for top in range(0, pixels.shape[0], TILE))
    form = SlideForm(pixels.shape[:2], pixels.dtype, encoding, pitch)
    return write_tiff_slide(path, bands, form, options=TiffOptions(**options))


@pytest.mark.parametrize("layout", list(Layout))
@pytest.mark.parametrize("shape", SIZES, ids=str)
def test_lossless_slides_read_back_exactly_in_three_readers(tmp_path: Path, shape, layout: Layout) -> None:
    pixels = pixels_of(shape)
    path = save(tmp_path / "a.tif", pixels, layout=layout, packing=Packing.DEFLATE)

    assert np.array_equal(tifffile.imread(path), pixels)
    assert np.array_equal(pyvips.Image.new_from_file(str(path)).numpy()[..., :3], pixels)
    with openslide.OpenSlide(path) as slide:
        seen = np.asarray(slide.read_region((0, 0), 0, shape[::-1]))[..., :3]
    assert np.array_equal(seen, pixels)
    ours = TiffSlide(path)
    assert np.array_equal(ours.read(Window(0, 0, *shape)), pixels)
    ours.close()


@pytest.mark.parametrize("layout", list(Layout))
def test_jpeg_tiles_decode_alike_in_three_decoders(tmp_path: Path, layout: Layout) -> None:
    pixels = pixels_of((300, 515))
    path = save(tmp_path / "a.tif", pixels, layout=layout, quality=95)

    first = tifffile.imread(path).astype(int)
    second = pyvips.Image.new_from_file(str(path)).numpy()[..., :3].astype(int)
    with openslide.OpenSlide(path) as slide:
        third = np.asarray(slide.read_region((0, 0), 0, (515, 300)))[..., :3].astype(int)

    assert np.abs(first - second).max() <= 1
    assert np.abs(first - third).max() <= 1
    assert np.abs(first - pixels).mean() < 1


def test_tags_match_the_stream(tmp_path: Path) -> None:
    path = save(tmp_path / "a.tif", pixels_of((300, 515)))

    with tifffile.TiffFile(path) as tiff:
        page = tiff.pages[0]
        offset, count = page.dataoffsets[0], page.databytecounts[0]
        assert page.photometric.name == "YCBCR"
        assert tuple(page.tags[530].value) == (1, 1)
        stream = path.read_bytes()[offset : offset + count]
    start = stream.index(b"\xff\xc0")
    assert [stream[start + 11 + 3 * i] for i in range(3)] == [0x11] * 3  # sampling factors of SOF0: 4:4:4


def test_the_ome_layout_is_one_page_with_reduced_pages_below(tmp_path: Path) -> None:
    """OME model, "Sub-resolutions": SubIFDs (330) from large to small, NewSubfileType (254) 1, main chain without."""
    path = save(tmp_path / "a.ome.tif", pixels_of((700, 1030)), layout=Layout.OME)

    with tifffile.TiffFile(path) as tiff:
        assert tiff.is_ome
        assert len(tiff.pages) == 1
        assert [level.shape[:2] for level in tiff.series[0].levels] == [(700, 1030), (350, 515), (175, 258), (88, 129)]
        assert all(page.tags[254].value == 1 for page in tiff.pages[0].pages)
        assert tiff.is_bigtiff


def test_the_flat_layout_shows_openslide_every_level(tmp_path: Path) -> None:
    path = save(tmp_path / "a.tif", pixels_of((700, 1030)), layout=Layout.FLAT)

    with openslide.OpenSlide(path) as slide:
        assert slide.level_dimensions == ((1030, 700), (515, 350), (258, 175), (129, 88))


@pytest.mark.parametrize("layout", list(Layout))
def test_the_pitch_is_the_same_in_two_readers(tmp_path: Path, layout: Layout) -> None:
    path = save(tmp_path / "a.tif", pixels_of((300, 300)), layout=layout)

    with openslide.OpenSlide(path) as slide:
        theirs = float(slide.properties["openslide.mpp-x"]), float(slide.properties["openslide.mpp-y"])
    image = pyvips.Image.new_from_file(str(path))
    ours = TiffSlide(path)
    assert theirs == pytest.approx(PITCH, rel=1e-6)
    assert (1e3 / image.xres, 1e3 / image.yres) == pytest.approx(PITCH, rel=1e-6)
    assert ours.facts.pitch == pytest.approx(PITCH, rel=1e-6)
    ours.close()


def test_a_missing_pitch_stays_missing(tmp_path: Path) -> None:
    path = save(tmp_path / "a.tif", pixels_of((300, 300)), pitch=None)

    with openslide.OpenSlide(path) as slide:
        assert "openslide.mpp-x" not in slide.properties
    ours = TiffSlide(path)
    assert ours.facts.pitch is None
    ours.close()


def test_the_profile_travels(tmp_path: Path) -> None:
    profile = profile_of(SRGB)
    path = save(tmp_path / "a.tif", pixels_of((300, 300)), encoding=read_profile(profile))

    with tifffile.TiffFile(path) as tiff:
        assert tiff.pages[0].iccprofile == profile


def test_levels_are_averaged_in_linear_light() -> None:
    """Black and white in equal parts are half the light: sRGB code 188 (IEC 61966-2-1), not 128."""
    board = np.zeros((2, 2, 3), np.uint8)
    board[0, 0] = board[1, 1] = 255

    assert (Halving(SRGB, np.dtype(np.uint8))(board) == 188).all()
    assert Halving(SRGB, np.dtype(np.uint16))(board.astype(np.uint16) * 257)[0, 0, 0] == round(65535 * 0.735357)


@pytest.mark.parametrize("code", range(0, 256, 5))
def test_even_areas_keep_their_code_at_every_level(code: int) -> None:
    assert (Halving(SRGB, np.dtype(np.uint8))(np.full((4, 4, 3), code, np.uint8)) == code).all()


def test_levels_end_where_one_tile_holds_all() -> None:
    assert level_shapes((4095, 4095))[-1] == (256, 256)
    assert level_shapes((1, 1)) == [(1, 1)]


@pytest.mark.parametrize("dtype", [np.uint16, np.float32])
def test_deep_slides_keep_their_depth(tmp_path: Path, dtype) -> None:
    pixels = pixels_of((300, 280), dtype)
    path = save(tmp_path / "a.tif", pixels, packing=Packing.ZSTD)

    assert np.array_equal(tifffile.imread(path), pixels)


def test_deep_slides_are_not_squeezed_into_jpeg(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="choose lossless"):
        save(tmp_path / "a.tif", pixels_of((30, 30), np.uint16))


def test_the_bytes_do_not_depend_on_threads(tmp_path: Path) -> None:
    pixels = pixels_of((700, 600))

    one, many = (save(tmp_path / f"{n}.tif", pixels, threads=n).read_bytes() for n in (1, 3))

    assert one == many


def test_windows_of_any_size_are_cut_from_the_same_slide(tmp_path: Path) -> None:
    pixels = pixels_of((700, 600))
    ours = TiffSlide(save(tmp_path / "a.tif", pixels, packing=Packing.DEFLATE))
    rng = np.random.default_rng(0)

    for _ in range(40):
        top, left = int(rng.integers(0, 690)), int(rng.integers(0, 590))
        window = Window(top, left, int(rng.integers(1, 700 - top + 1)), int(rng.integers(1, 600 - left + 1)))
        assert np.array_equal(ours.read(window), pixels[top : top + window.height, left : left + window.width])
    ours.close()


def test_a_name_that_is_taken_stays(tmp_path: Path) -> None:
    path = save(tmp_path / "a.tif", pixels_of((30, 30)))
    before = path.read_bytes()

    with pytest.raises(OutputError, match="exists already"):
        save(path, pixels_of((30, 30), seed=2))
    assert path.read_bytes() == before


def test_a_run_that_breaks_leaves_nothing(tmp_path: Path) -> None:
    def bands():
        yield np.zeros((TILE, 300, 3), np.uint8)
        raise PictureError(Path("source.tif"), "tile 7 is broken")

    with pytest.raises(PictureError, match="tile 7"):
        write_tiff_slide(tmp_path / "a.tif", bands(), SlideForm((600, 300), np.dtype(np.uint8), SRGB))
    assert list(tmp_path.iterdir()) == []


def test_missing_rows_are_noticed(tmp_path: Path) -> None:
    bands = iter([np.zeros((TILE, 300, 3), np.uint8)])

    with pytest.raises((InputError, OutputError)):
        write_tiff_slide(tmp_path / "a.tif", bands, SlideForm((600, 300), np.dtype(np.uint8), SRGB))
    assert list(tmp_path.iterdir()) == []


def test_a_truncated_slide_is_named(tmp_path: Path) -> None:
    path = save(tmp_path / "a.tif", pixels_of((700, 600)))
    (tmp_path / "b.tif").write_bytes(path.read_bytes()[:200])

    with pytest.raises(PictureError, match="cannot be opened"):
        TiffSlide(tmp_path / "b.tif")


def test_several_channels_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "a.ome.tif"
    tifffile.imwrite(path, np.zeros((4, 64, 64), np.uint16), ome=True, metadata={"axes": "CYX"})

    with pytest.raises(RefusedError, match=r"planes|samples"):
        TiffSlide(path)
