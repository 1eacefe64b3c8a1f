"""Whole slides, from file to file."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import openslide
import pytest
import tifffile
import zarr

from hueferry.colour.encoding import SRGB
from hueferry.errors import InputError, OutputError, PictureError, RefusedError
from hueferry.files.write import write
from hueferry.picture import Picture, Window
from hueferry.slides.cautions import CAUTIONS
from hueferry.slides.codecs import Packing
from hueferry.slides.fit import SlideAim
from hueferry.slides.gather import reference_from
from hueferry.slides.readers import find_slides, open_slide
from hueferry.slides.reference import SlideReference
from hueferry.slides.run import SlideOutcome, measure_slide, stain_slide
from hueferry.slides.settings import Container, StainSettings
from hueferry.slides.tiff_writer import SlideForm
from hueferry.slides.zarr_writer import write_zarr_slide
from slides.sections import HED, PITCH, bands_of, rendered, restain, save_slide

LOSSLESS = StainSettings(packing=Packing.DEFLATE)


@pytest.fixture(scope="module")
def slides(tmp_path_factory) -> tuple[Path, Path]:
    """A section, and another one of another staining run and scanner."""
    folder = tmp_path_factory.mktemp("slides")
    change = restain(np.random.default_rng(3), (0, 1), 0.95)
    source = save_slide(folder / "source.tif", rendered(11, height=600, width=700))
    return source, save_slide(folder / "reference.tif", change(rendered(12, height=600, width=700)))


@pytest.fixture(scope="module")
def reference(slides) -> SlideReference:
    return reference_from([slides[1]])


@pytest.fixture(scope="module")
def outcome(slides, reference, tmp_path_factory) -> SlideOutcome:
    return stain_slide(slides[0], reference, tmp_path_factory.mktemp("out"), settings=LOSSLESS)


def test_a_slide_comes_nearer_to_its_reference(outcome: SlideOutcome) -> None:
    numbers = outcome.numbers

    assert numbers["cost_density_after"] < 0.7 * numbers["cost_density_before"]
    assert numbers["cost_delta_e_after"] < 0.7 * numbers["cost_delta_e_before"]


def test_glass_reaches_its_target_within_two_codes(outcome: SlideOutcome) -> None:
    assert outcome.numbers["glass_off_target_codes"] <= 2


def test_structure_is_kept_and_nothing_folds(outcome: SlideOutcome) -> None:
    assert outcome.numbers["nuclear_ssim"] > 0.9
    assert outcome.numbers["nuclear_gradient_correlation"] > 0.95
    assert outcome.numbers["certificate"]["folds"] == 0
    assert outcome.numbers["certificate"]["safe"]


def test_cautions_come_with_every_slide(outcome: SlideOutcome) -> None:
    assert outcome.cautions == CAUTIONS
    assert any("not validated for diagnosis" in caution for caution in outcome.cautions)
    with tifffile.TiffFile(outcome.output) as tiff:
        assert "not validated for diagnosis" in tiff.ome_metadata


def test_the_numbers_are_json(outcome: SlideOutcome) -> None:
    assert json.loads(json.dumps(outcome.numbers, allow_nan=False)) == outcome.numbers


def test_the_output_keeps_size_and_pitch(outcome: SlideOutcome) -> None:
    result = open_slide(outcome.output)

    assert result.shape == (600, 700)
    assert result.facts.pitch == pytest.approx(PITCH, rel=1e-6)
    result.close()


def test_the_overlay_shows_the_tissue(outcome: SlideOutcome) -> None:
    assert outcome.overlay is not None
    assert outcome.overlay.stat().st_size > 1000


def test_the_bytes_do_not_depend_on_workers(slides, reference, outcome: SlideOutcome, tmp_path: Path) -> None:
    again = stain_slide(slides[0], reference, tmp_path, settings=StainSettings(packing=Packing.DEFLATE, threads=5))

    assert again.output.read_bytes() == outcome.output.read_bytes()


@pytest.mark.parametrize("side", [256, 512, 1000])
def test_windows_of_any_size_give_the_same_pixels(slides, outcome: SlideOutcome, side: int) -> None:
    from hueferry.applying.engine import Engine

    source, result = open_slide(slides[0]), open_slide(outcome.output)
    engine = Engine(outcome.fit.table, np.uint8, 8)

    for top in range(0, 600, side):
        for left in range(0, 700, side):
            window = Window(top, left, min(side, 600 - top), min(side, 700 - left))
            assert np.array_equal(engine.apply(source.read(window)), result.read(window))
    source.close()
    result.close()


def test_a_slide_towards_itself_is_unchanged(slides, tmp_path: Path) -> None:
    done = stain_slide(slides[0], reference_from([slides[0]]), tmp_path, settings=LOSSLESS)

    difference = np.abs(tifffile.imread(done.output).astype(int) - tifffile.imread(slides[0]).astype(int))
    assert difference.max() <= 1


def test_adopting_takes_on_the_densities(slides, reference, tmp_path: Path) -> None:
    settings = StainSettings(aim=SlideAim.ADOPT, measure_only=True)

    done = stain_slide(slides[0], reference, tmp_path, settings=settings)

    assert done.numbers["cost_density_after"] < 0.25 * done.numbers["cost_density_before"]
    assert done.numbers["certificate"]["folds"] == 0
    assert done.numbers["glass_off_target_codes"] <= 2


def test_measuring_writes_nothing(slides, reference, tmp_path: Path) -> None:
    done = stain_slide(slides[0], reference, tmp_path, settings=StainSettings(measure_only=True))

    assert done.output is None
    assert list(tmp_path.iterdir()) == []
    assert measure_slide(slides[0])["tissue_share"] == pytest.approx(done.numbers["before"]["tissue_share"])


def test_a_brown_stain_is_measured_only_unless_asked(reference, tmp_path: Path) -> None:
    brown = save_slide(tmp_path / "brown.tif", rendered(5, HED[[0, 2]]))
    out = tmp_path / "out"
    out.mkdir()
    kept = stain_slide(brown, reference, out)
    corrected = stain_slide(brown, reference, out, settings=StainSettings(correct_measured=True))

    assert kept.output is None
    assert any("measurement itself" in sentence for sentence in kept.sentences)
    assert corrected.output is not None


def test_an_original_is_never_overwritten(slides, reference) -> None:
    settings = StainSettings(layout=Container.FLAT, overwrite=True)

    with pytest.raises(OutputError, match="the original"):
        stain_slide(slides[0], reference, slides[0].parent, settings=settings)


def test_planted_identifiers_are_nowhere(reference, tmp_path: Path) -> None:
    planted = [f"PLANTED-{n:02d}" for n in range(12)]
    path = tmp_path / "named.tif"
    text = ";".join(planted[:6])
    extra = [(code, 2, 0, planted[6 + i], True) for i, code in enumerate((271, 272, 306, 315, 33432, 37510))]
    tifffile.imwrite(
        path, rendered(11), tile=(256, 256), photometric="rgb", description=text, extratags=extra, metadata=None
    )
    out = tmp_path / "out"
    out.mkdir()

    plain = stain_slide(path, reference, out)
    asked = stain_slide(path, reference, out, settings=StainSettings(keep_texts=True, overwrite=True))

    assert not any(name in json.dumps(plain.numbers) for name in planted)
    with tifffile.TiffFile(asked.output) as tiff:
        assert "PLANTED-00" in str(tiff.ome_metadata)
    stain_slide(path, reference, out, settings=StainSettings(overwrite=True))
    written = b"".join(file.read_bytes() for file in sorted(out.iterdir()))
    assert not any(name.encode() in written for name in planted)


def test_fluorescence_is_refused_by_name(tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    path = save_slide(tmp_path / "glow.tif", (rng.random((300, 300, 3)) * 30).astype(np.uint8))

    with pytest.raises(RefusedError, match="fluorescence"):
        measure_slide(path)


def test_a_house_palette_is_not_led_by_one_outlier(tmp_path: Path) -> None:
    paths = [save_slide(tmp_path / f"{n}.tif", rendered(30 + n)) for n in range(7)]
    odd = save_slide(tmp_path / "odd.tif", rendered(40, HED[[1, 2]][::-1]))

    without, with_odd = (reference_from(chosen) for chosen in (paths, [*paths, odd]))

    assert with_odd.shares[-1] == min(with_odd.shares)
    assert np.abs(with_odd.sample(SRGB).density.mean(axis=0) - without.sample(SRGB).density.mean(axis=0)).max() < 0.03


@pytest.mark.parametrize("version", ["0.4", "0.5"])
@pytest.mark.parametrize("shape", [(1, 1), (257, 255), (600, 300)], ids=str)
def test_ome_zarr_reads_back_exactly(tmp_path: Path, version: str, shape: tuple[int, int]) -> None:
    pixels = rendered(1, height=max(shape[0], 8), width=max(shape[1], 8))[: shape[0], : shape[1]]
    form = SlideForm(shape, pixels.dtype, SRGB, (0.25, 0.5))

    path = write_zarr_slide(tmp_path / "a.ome.zarr", bands_of(pixels), form, version=version)

    slide = open_slide(path)
    assert np.array_equal(slide.read(Window(0, 0, *shape)), pixels)
    assert slide.facts.pitch == pytest.approx((0.25, 0.5))
    group = zarr.open_group(str(path), mode="r")
    assert np.array_equal(np.asarray(group["0"]).transpose(1, 2, 0), pixels)
    assert group.metadata.zarr_format == (2 if version == "0.4" else 3)


def test_a_slide_may_be_written_as_ome_zarr(slides, reference, outcome: SlideOutcome, tmp_path: Path) -> None:
    done = stain_slide(slides[0], reference, tmp_path, settings=StainSettings(layout=Container.ZARR))

    ours = open_slide(done.output)
    assert np.array_equal(ours.read(Window(0, 0, 600, 700)), tifffile.imread(outcome.output))
    with pytest.raises(OutputError, match="exists already"):
        stain_slide(slides[0], reference, tmp_path, settings=StainSettings(layout=Container.ZARR))


def test_the_flat_layout_opens_in_openslide(slides, reference, outcome: SlideOutcome, tmp_path: Path) -> None:
    settings = StainSettings(layout=Container.FLAT, packing=Packing.DEFLATE)

    done = stain_slide(slides[0], reference, tmp_path, settings=settings)

    with openslide.OpenSlide(done.output) as slide:
        assert slide.level_count == 3
        seen = np.asarray(slide.read_region((0, 0), 0, (700, 600)))[..., :3]
    assert np.array_equal(seen, tifffile.imread(outcome.output))


def test_openslide_and_our_reader_see_the_same_slide(slides) -> None:
    from hueferry.slides.scanner import ScannerSlide

    theirs, ours = ScannerSlide(slides[0]), open_slide(slides[0])

    assert theirs.levels == ours.levels
    assert theirs.facts.pitch == pytest.approx(ours.facts.pitch)
    for level in range(len(ours.levels)):
        window = Window(10, 20, 100, 90)
        assert np.array_equal(theirs.read_level(level, window), ours.read_level(level, window))
    theirs.close()
    ours.close()


def test_fields_of_view_are_slides_too(reference, tmp_path: Path) -> None:
    path = write(Picture(rendered(14), SRGB), tmp_path / "field.png")

    done = stain_slide(path, reference, tmp_path)

    assert done.output == tmp_path / "field.ome.tif"


def test_too_little_tissue_changes_nothing_and_says_so(reference, tmp_path: Path) -> None:
    pixels = np.full((300, 300, 3), 240, np.uint8)
    pixels[100:160, 100:160] = (180, 80, 160)
    path = save_slide(tmp_path / "bare.tif", pixels)
    mask = np.zeros((300, 300), dtype=bool)

    done = stain_slide(path, reference, tmp_path, settings=LOSSLESS, mask=mask)

    assert done.fit.basis == "none"
    assert any("too little tissue" in sentence for sentence in done.sentences)
    assert np.array_equal(tifffile.imread(done.output), pixels)


def test_missing_slides_are_named(tmp_path: Path) -> None:
    with pytest.raises(PictureError, match="cannot be read"):
        open_slide(tmp_path / "absent.tif")
    with pytest.raises(InputError, match="no slide was found"):
        find_slides([tmp_path])
