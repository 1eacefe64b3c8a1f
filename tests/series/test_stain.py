"""Runs on slides: one bad file, what an earlier run has done, and what is somebody else's."""

from __future__ import annotations

import json
from pathlib import Path

import attrs
import numpy as np
import pytest

from hueferry.errors import InputError, OutputError
from hueferry.jobs import check_folder, stain_files
from hueferry.record.record import FileFact, to_json
from hueferry.series.stain import StainOrder, StainRun, seal_run, stain_slides
from hueferry.slides.codecs import Packing
from hueferry.slides.run import SlideFailure, SlideOutcome
from hueferry.slides.settings import Container, StainSettings
from slides.sections import rendered, restain, save_slide

LOSSLESS = StainSettings(packing=Packing.DEFLATE)


@pytest.fixture
def order(tmp_path: Path) -> StainOrder:
    """Two small slides, and one to bring them to."""
    (tmp_path / "slides").mkdir()
    for name, number in (("slides/a.tif", 11), ("slides/b.tif", 12), ("reference.tif", 13)):
        save_slide(tmp_path / name, rendered(number, height=300, width=300))
    return StainOrder(
        inputs=[tmp_path / "slides"], to=[tmp_path / "reference.tif"], out=tmp_path / "out", settings=LOSSLESS
    )


def times(out: Path) -> dict[str, int]:
    """When each file was written."""
    return {
        path.name: path.stat().st_mtime_ns for path in out.rglob("*") if path.is_file() and ".hueferry" not in str(path)
    }


def finished(order: StainOrder) -> StainRun:
    run = stain_slides(order)
    seal_run(order, run.schedule, [order.out / "record.json"])
    return run


def test_a_second_run_does_no_work_and_says_the_same(order: StainOrder) -> None:
    first = finished(order)
    written = times(order.out)
    seen: list[object] = []

    second = stain_slides(order, on_plan=seen.append, on_done=seen.append)

    assert second.unchanged
    assert to_json(second.record) == to_json(first.record)
    assert times(order.out) == written
    assert seen == ["2 of 2 slides were done by an earlier run; 0 to do"]


def test_changed_settings_redo(order: StainOrder) -> None:
    finished(order)
    before = (order.out / "a.ome.tif").read_bytes()
    other = attrs.evolve(order, settings=attrs.evolve(order.settings, strength=0.5))

    run = stain_slides(other)

    assert not run.unchanged
    assert run.record.settings["strength"] == 0.5
    assert (order.out / "a.ome.tif").read_bytes() != before


def test_neither_threads_nor_overwriting_are_settings_of_a_result(order: StainOrder) -> None:
    finished(order)

    again = attrs.evolve(order, settings=attrs.evolve(order.settings, threads=5, overwrite=True))

    assert stain_slides(again).unchanged


def test_a_changed_slide_is_done_again_alone(order: StainOrder) -> None:
    finished(order)
    written = times(order.out)
    (order.inputs[0] / "a.tif").unlink()
    save_slide(order.inputs[0] / "a.tif", rendered(15, height=300, width=300))
    seen: list[SlideOutcome | SlideFailure] = []

    stain_slides(order, on_done=seen.append)

    assert [one.source.name for one in seen] == ["a.tif"]
    assert times(order.out)["b.ome.tif"] == written["b.ome.tif"]
    assert times(order.out)["a.ome.tif"] != written["a.ome.tif"]


def test_what_is_gone_is_made_again_as_it_was(order: StainOrder) -> None:
    finished(order)
    kept = {name: (order.out / name).read_bytes() for name in times(order.out)}
    (order.out / "a.tissue.png").unlink()
    (order.out / "b.ome.tif").unlink()

    stain_slides(order)

    assert {name: (order.out / name).read_bytes() for name in times(order.out)} == kept


def test_a_result_that_somebody_changed_is_not_overwritten(order: StainOrder) -> None:
    finished(order)
    (order.out / "a.ome.tif").write_bytes(b"mine")

    with pytest.raises(OutputError, match="not an unchanged result"):
        stain_slides(order)
    assert (order.out / "a.ome.tif").read_bytes() == b"mine"
    assert not stain_slides(attrs.evolve(order, settings=attrs.evolve(order.settings, overwrite=True))).unchanged
    assert (order.out / "a.ome.tif").read_bytes() != b"mine"


def test_folders_are_results_too(order: StainOrder) -> None:
    zarr = attrs.evolve(order, settings=StainSettings(layout=Container.ZARR))
    run = finished(zarr)
    before = FileFact.of(order.out / "a.ome.zarr")

    assert stain_slides(zarr).unchanged
    assert run.record.entries[0].output == FileFact("a.ome.zarr", before.size, before.sha256)
    chunk = sorted(path for path in (order.out / "a.ome.zarr" / "0").rglob("*") if path.is_file())[-1]
    chunk.write_bytes(b"")
    again = attrs.evolve(zarr, settings=attrs.evolve(zarr.settings, overwrite=True))
    assert len(check_folder(order.out)) == 1
    assert not stain_slides(again).unchanged
    assert FileFact.of(order.out / "a.ome.zarr") == before


def test_results_below_the_inputs_are_no_inputs(order: StainOrder) -> None:
    within = attrs.evolve(order, out=order.inputs[0] / "out")
    finished(within)

    assert stain_slides(within).unchanged


def test_one_bad_file_does_not_stop_the_rest(order: StainOrder) -> None:
    (order.inputs[0] / "broken.tif").write_bytes(b"II*\0nothing more")
    seen: list[SlideOutcome | SlideFailure] = []

    record = stain_slides(order, on_done=seen.append).record

    assert [type(one) for one in seen] == [SlideOutcome, SlideOutcome, SlideFailure]
    assert "broken.tif" in record.failures[0].reason
    assert len(record.entries) == 2


def test_two_slides_of_one_name_are_planned_before_any_write(tmp_path: Path) -> None:
    for folder in ("a", "b"):
        (tmp_path / folder).mkdir()
        (tmp_path / folder / "x.tif").write_bytes(b"II*\0")

    with pytest.raises(InputError, match="different folders"):
        stain_slides(StainOrder(inputs=[tmp_path / "a", tmp_path / "b"], out=tmp_path / "out"))
    assert not (tmp_path / "out").exists()


def test_nothing_is_left_where_nothing_was_done(tmp_path: Path) -> None:
    (tmp_path / "broken.tif").write_bytes(b"II*\0nothing more")

    with pytest.raises(InputError, match="no reference slide can be used"):
        stain_slides(StainOrder(inputs=[tmp_path / "broken.tif"], out=tmp_path / "out"))
    assert not (tmp_path / "out").exists()


def test_without_references_slides_meet_in_their_house_palette(tmp_path: Path) -> None:
    (tmp_path / "in").mkdir()
    for n in range(3):
        change = restain(np.random.default_rng(n), (0, 1), 0.95)
        save_slide(tmp_path / "in" / f"{n}.tif", change(rendered(20 + n)))

    record = stain_files([tmp_path / "in"], out=tmp_path / "out", choices={"measure_only": True})

    numbers = [entry.numbers for entry in record.entries]
    before, after = (np.array([one[when]["mean_density"] for one in numbers]) for when in ("before", "after"))
    assert np.ptp(after, axis=0).sum() < np.ptp(before, axis=0).sum()
    assert json.loads((tmp_path / "out" / "record.json").read_text())["settings"]["measure_only"]
