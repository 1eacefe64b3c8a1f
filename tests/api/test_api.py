"""The verbs of the package as scripts and notebooks use them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from PIL import Image

import hueferry as hf
import hueferry.applying.engine
import hueferry.palettes.palette
import hueferry.reports.page  # the folders must not hide the verbs of the same stem
from photographs import in_other_light, photograph


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.float32, np.float64])
def test_arrays_in_arrays_out(dtype: type) -> None:
    top = {np.uint8: 1, np.uint16: 257}.get(dtype, 1 / 255)
    source = (photograph("china", step=3) * float(top)).astype(dtype)
    reference = in_other_light(photograph("china", step=3))

    result = hf.match(source, reference)

    assert result.dtype == dtype
    assert result.shape == source.shape
    assert np.abs(result.astype(float) - reference * float(top)).mean() < np.abs(source - reference * float(top)).mean()


def test_gray_stays_gray() -> None:
    gray = photograph("china", step=4)[:, :, 1]

    assert hf.match(gray, photograph("china", step=4), aim="adopt", method="gaussian").shape == gray.shape


def test_the_way_of_the_readme(tmp_path: Path) -> None:
    Image.fromarray(photograph("china")).save(tmp_path / "a.png")
    Image.fromarray(in_other_light(photograph("china"))).save(tmp_path / "hero.png")

    picture = hf.read(tmp_path / "a.png")
    fit = hf.fit(picture, to=tmp_path / "hero.png", aim="agree")
    written = hf.write(fit.apply(picture), tmp_path / "out.png")

    assert fit.certificate.safe
    assert fit.cost_after.w2 < fit.cost_before.w2
    assert hf.cost(written, tmp_path / "hero.png").w2 < hf.cost(tmp_path / "a.png", tmp_path / "hero.png").w2
    np.testing.assert_array_equal(hf.apply(fit, picture).pixels, fit.apply(picture).pixels)
    np.testing.assert_array_equal(hf.apply(fit.table, picture).pixels, fit.apply(picture).pixels)


def test_a_palette_of_one_or_several_pictures(tmp_path: Path) -> None:
    Image.fromarray(photograph("china")).save(tmp_path / "a.png")
    Image.fromarray(photograph("flower")).save(tmp_path / "b.png")

    one, common = hf.palette(tmp_path / "a.png"), hf.palette(tmp_path / "a.png", tmp_path / "b.png")

    clipped = np.isin(photograph("china"), (0, 255)).all(axis=2).sum()  # counted apart
    assert one.pixels == photograph("china")[:, :, 0].size - clipped
    assert 1 < len(common) <= 1024


@pytest.mark.parametrize("choices", [{"aim": "love"}, {"method": "magic"}, {"only": "smell"}, {"strength": 3.0}])
def test_unknown_choices_are_refused(choices: dict[str, object]) -> None:
    pixels = photograph("china", step=8)

    with pytest.raises(hf.InputError):
        hf.match(pixels, pixels, **choices)


def test_what_is_no_picture_is_refused() -> None:
    with pytest.raises(hf.InputError, match="pixels must be"):
        hf.match(np.zeros((4, 4, 7), np.uint8), np.zeros((4, 4, 3), np.uint8))


def test_unknown_names_are_unknown() -> None:
    with pytest.raises(AttributeError, match="no attribute"):
        hf.no_such_verb  # noqa: B018 - the access is what is tested


def test_saved_maps_and_palettes_are_used_by_their_paths(tmp_path: Path) -> None:
    """A slope of one half halves every code."""
    (tmp_path / "half.cc").write_text(
        "<ColorCorrection><SOPNode><Slope>.5 .5 .5</Slope><Offset>0 0 0</Offset><Power>1 1 1</Power></SOPNode>"
        "</ColorCorrection>",
        encoding="utf-8",
    )
    Image.fromarray(photograph("china")).save(tmp_path / "a.png")

    halved = hf.apply(tmp_path / "half.cc", tmp_path / "a.png")

    assert np.abs(halved.pixels - 0.5 * photograph("china")).max() <= 0.501
    with pytest.raises(hf.errors.MapFileError, match="no such file"):
        hf.apply(tmp_path / "none.clf", tmp_path / "a.png")
