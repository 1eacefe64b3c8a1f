"""Slides through a saved map, window by window."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import tifffile

from hueferry.cli.main import run
from hueferry.picture import Window
from hueferry.slides.readers import open_slide
from hueferry.tables.build import sample_table
from hueferry.tables.clf import clf_text
from slides.sections import rendered, save_slide


@pytest.fixture
def halving(tmp_path: Path) -> Path:
    """A map that halves every code."""
    path = tmp_path / "half.clf"
    path.write_text(
        clf_text(sample_table(lambda codes: codes / 2, size=17), encoding="sRGB", facts={}), encoding="utf-8"
    )
    return path


@pytest.mark.parametrize(("layout", "name"), [("ome", "a.ome.tif"), ("zarr", "a.ome.zarr")])
def test_a_slide_goes_through_a_saved_map(
    layout: str, name: str, halving: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    pixels = rendered(3, height=300, width=520)
    save_slide(tmp_path / "a.tif", pixels)
    words = ["--stain", "--layout", layout, "--packing", "deflate", "--out", str(tmp_path / "out"), "--json"]

    assert run(["apply", str(halving), str(tmp_path / "a.tif"), *words]) == 0

    assert json.loads(capsys.readouterr().out)["written"] == [(tmp_path / "out" / name).as_posix()]
    slide = open_slide(tmp_path / "out" / name)
    assert np.abs(slide.read(Window(0, 0, 300, 520)).astype(float) - pixels / 2).max() <= 0.5 + 1e-6
    assert slide.levels == [(300, 520), (150, 260), (75, 130)]
    assert slide.facts.pitch == pytest.approx((0.5, 0.5))
    slide.close()


def test_what_cannot_be_done_is_named_and_the_rest_is_done(
    halving: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "in").mkdir()
    save_slide(tmp_path / "in" / "a.tif", rendered(3, height=300, width=300))
    (tmp_path / "in" / "broken.tif").write_bytes(b"II*\0nothing more")
    words = ["apply", str(halving), str(tmp_path / "in"), "--stain", "--out", str(tmp_path / "out")]

    assert run(words) == 1
    assert "broken.tif" in capsys.readouterr().err
    with tifffile.TiffFile(tmp_path / "out" / "a.ome.tif") as tiff:
        assert "Colours sent through a saved map" in str(tiff.ome_metadata)
    assert run(words) == 2
    assert "exists already" in capsys.readouterr().err
