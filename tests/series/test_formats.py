"""Runs over formats that are only read, and over scene-linear light."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from hueferry.colour.scene import REC_709, scene_linear, to_codes
from hueferry.files.light import light_of
from hueferry.files.read import read
from hueferry.files.write import write
from hueferry.fitting.settings import Settings
from hueferry.jobs import match_files
from hueferry.picture import Picture
from hueferry.series.match import MatchOrder, plan_match
from photographs import photograph

from ..files.hevc import heic

SMALL = photograph("china", step=16)


def order_of(picture: Path, reference: Path) -> MatchOrder:
    return MatchOrder(inputs=[picture], to=[reference], out=picture.parent / "out", settings=Settings())


def test_a_heic_that_needs_no_change_still_becomes_what_its_new_name_says(tmp_path: Path) -> None:
    (tmp_path / "a.HEIC").write_bytes(heic(SMALL))
    order = MatchOrder(
        inputs=[tmp_path / "a.HEIC"], to=[tmp_path / "a.HEIC"], out=tmp_path / "out", settings=Settings()
    )

    said = plan_match(order).sentences
    match_files(order)

    assert any("becomes a.avif: .HEIC is not written" in sentence for sentence in said)
    result = read(tmp_path / "out" / "a.avif")
    assert result.metadata.format == "avif"
    assert np.abs(result.pixels.astype(int) - SMALL).mean() < 1.5


def test_light_goes_through_a_run_with_its_highlights(tmp_path: Path) -> None:
    light = (photograph("china", step=4).astype(np.float64) / 255) ** 2.2 * 30
    for name, gain in (("hero", 1.0), ("dark", 0.4)):
        picture = Picture(to_codes(light * gain).astype(np.float32), scene_linear(REC_709), bits=32)
        write(picture, tmp_path / f"{name}.exr")
    order = MatchOrder(
        inputs=[tmp_path / "dark.exr"], to=[tmp_path / "hero.exr"], out=tmp_path / "out", settings=Settings()
    )

    match_files(order)

    got = light_of(read(tmp_path / "out" / "dark.exr"), associated=True)
    bright = light > 5
    assert np.abs(np.log2(got[bright] / light[bright])).mean() < 0.1
    assert (tmp_path / "out" / "report.html").stat().st_size > 10_000
