"""Runs resume, redo what changed and nothing else, and leave the same bytes whoever did the work."""

from __future__ import annotations

import shutil
from pathlib import Path

import attrs
import numpy as np
import pytest
from PIL import Image

from hueferry.errors import OutputError
from hueferry.fitting.settings import Aim, Settings
from hueferry.jobs import match_files
from hueferry.maps.method import Method
from hueferry.record.record import Failure, Record, to_json
from hueferry.series.journal import FOLDER, Journal
from hueferry.series.keepsake import Done
from hueferry.series.match import MatchOrder, plan_match
from photographs import in_other_light, photograph

QUICK = Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN)


def small(gains: tuple[float, float, float]) -> Image.Image:
    return Image.fromarray(in_other_light(photograph("flower"), gains=gains)[::6, ::6])


@pytest.fixture
def order(tmp_path: Path) -> MatchOrder:
    shoot = tmp_path / "shoot"
    shoot.mkdir()
    for number in range(5):
        small((1.3 - 0.1 * number, 1.0, 0.7 + 0.1 * number)).save(shoot / f"{number}.jpg", quality=93)
    small((1.0, 1.0, 1.0)).save(tmp_path / "hero.png")
    return MatchOrder(inputs=[shoot], to=[tmp_path / "hero.png"], out=tmp_path / "out", settings=QUICK)


def tree(folder: Path) -> dict[str, bytes]:
    """Every file for people by its name below the folder; the journal has its own clock."""
    files = (path for path in sorted(folder.rglob("*")) if path.is_file() and FOLDER not in path.parts)
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in files}


def times(folder: Path) -> dict[Path, int]:
    return {path: path.stat().st_mtime_ns for path in folder.rglob("*")}


def work(order: MatchOrder) -> tuple[Record, list[str]]:
    """Run, and return the record with the names of the pictures that were done anew."""
    names: list[str] = []

    def note(_: int, __: int, outcome: Done | Failure) -> None:
        path = outcome.path if isinstance(outcome, Failure) else outcome.entry.source.path
        names.append(Path(path).name)

    record = match_files(order, on_done=note)
    return record, sorted(names)


def test_a_second_run_touches_nothing_and_says_the_same(order: MatchOrder) -> None:
    first, done = work(order)
    before = times(order.out)

    second, again = work(order)

    assert done == ["0.jpg", "1.jpg", "2.jpg", "3.jpg", "4.jpg"]
    assert again == []
    assert times(order.out) == before
    assert to_json(second) == to_json(first)


def test_only_the_picture_that_changed_is_done_again(order: MatchOrder, tmp_path: Path) -> None:
    work(order)
    small((0.6, 1.0, 1.4)).save(order.inputs[0] / "2.jpg", quality=93)

    _, again = work(order)
    elsewhere, _ = work(attrs.evolve(order, out=tmp_path / "fresh"))

    assert again == ["2.jpg"]
    assert tree(order.out) == tree(tmp_path / "fresh")
    assert len(elsewhere.entries) == 5


def test_a_picture_that_is_only_touched_is_not_done_again(order: MatchOrder) -> None:
    work(order)
    (order.inputs[0] / "2.jpg").touch()

    assert work(order)[1] == []


def test_a_new_picture_joins_and_a_lost_result_is_made_again(order: MatchOrder) -> None:
    work(order)
    small((0.9, 1.0, 1.4)).save(order.inputs[0] / "9.jpg", quality=93)
    (order.out / "0.jpg").unlink()

    record, again = work(order)

    assert again == ["0.jpg", "9.jpg"]
    assert len(record.entries) == 6


def test_other_settings_redo_all_and_replace_our_own_results(order: MatchOrder, tmp_path: Path) -> None:
    work(order)
    other = attrs.evolve(order, settings=attrs.evolve(QUICK, strength=0.5))

    _, again = work(other)
    work(attrs.evolve(other, out=tmp_path / "fresh"))

    assert len(again) == 5
    assert tree(order.out) == tree(tmp_path / "fresh")


def test_another_reference_of_the_same_name_redoes_all(order: MatchOrder) -> None:
    work(order)
    small((0.9, 1.0, 1.2)).save(order.to[0])

    assert len(work(order)[1]) == 5


def test_what_somebody_changed_is_not_replaced_unless_asked(order: MatchOrder) -> None:
    work(order)
    (order.out / "1.jpg").write_bytes(b"retouched by hand")

    with pytest.raises(OutputError, match="not an unchanged result"):
        work(order)

    assert (order.out / "1.jpg").read_bytes() == b"retouched by hand"
    assert work(attrs.evolve(order, overwrite=True))[1] == ["1.jpg"]


@pytest.mark.parametrize("aim", [Aim.ADOPT, Aim.AGREE])
def test_two_and_four_workers_leave_the_bytes_of_one(aim: Aim, order: MatchOrder, tmp_path: Path) -> None:
    one = attrs.evolve(order, settings=attrs.evolve(QUICK, aim=aim, method=None if aim is Aim.AGREE else QUICK.method))
    work(one)

    for workers in (2, 4):
        work(attrs.evolve(one, out=tmp_path / str(workers), workers=workers))

        assert tree(tmp_path / str(workers)) == tree(order.out)


def test_a_failure_is_remembered_until_its_picture_changes(order: MatchOrder) -> None:
    broken = order.inputs[0] / "3.jpg"
    whole = broken.read_bytes()
    broken.write_bytes(whole[:500])

    first, _ = work(order)
    second, again = work(order)
    broken.write_bytes(whole)
    third, mended = work(order)

    assert [Path(failure.path).name for failure in first.failures] == ["3.jpg"]
    assert to_json(second) == to_json(first)
    assert again == []
    assert not third.failures
    assert mended == ["3.jpg"]


def test_a_plan_writes_nothing_and_foresees_the_run(order: MatchOrder) -> None:
    plan = plan_match(order)

    assert not order.out.exists()
    assert {step.output for step in plan.to_do} == {f"{number}.jpg" for number in range(5)}
    work(order)
    assert plan_match(order).to_do == []


def test_names_that_would_collide_are_planned_before_anything_is_written(order: MatchOrder) -> None:
    small((1.0, 1.0, 1.0)).save(order.inputs[0] / "A.JPG", format="jpeg")
    small((1.0, 1.1, 1.0)).save(order.inputs[0] / "a.jpg", format="jpeg")

    plan = plan_match(order)

    assert [step.errand.output.name for step in plan.steps][-2:] == ["A.JPG", "a-2.jpg"]
    assert any("a-2.jpg" in sentence for sentence in plan.sentences)


def test_results_inside_the_folder_of_the_pictures_are_not_taken_for_pictures(order: MatchOrder) -> None:
    inside = attrs.evolve(order, out=order.inputs[0] / "matched")

    first, _ = work(inside)
    second, again = work(inside)

    assert len(first.entries) == len(second.entries) == 5
    assert again == []


def test_a_folder_in_use_is_refused(order: MatchOrder) -> None:
    work(order)

    with Journal(order.out) as journal:
        journal.rows()
        with pytest.raises(OutputError, match="another run is at work"):
            work(order)


def test_a_link_in_place_of_the_journal_is_refused(order: MatchOrder, tmp_path: Path) -> None:
    (tmp_path / "elsewhere").mkdir()
    order.out.mkdir()
    (order.out / FOLDER).symlink_to(tmp_path / "elsewhere")

    with pytest.raises(OutputError, match="this is a link"):
        work(order)

    assert not list((tmp_path / "elsewhere").iterdir())


@pytest.mark.parametrize("data", [b"not a database at all, but long enough to look", bytes(4096)])
def test_a_broken_journal_is_one_sentence(data: bytes, order: MatchOrder) -> None:
    work(order)
    (order.out / FOLDER / "journal.sqlite").write_bytes(data)

    with pytest.raises(OutputError, match="this journal cannot be used"):
        work(attrs.evolve(order, overwrite=True))


def test_a_run_of_failures_leaves_no_folder(order: MatchOrder) -> None:
    for path in order.inputs[0].iterdir():
        path.write_bytes(b"\xff\xd8\xff")

    record, _ = work(order)

    assert len(record.failures) == 5
    assert not order.out.exists()


def test_two_hundred_files_with_bad_ones_among_them(tmp_path: Path) -> None:
    shoot = tmp_path / "shoot"
    shoot.mkdir()
    rng = np.random.default_rng(3)
    good = Image.fromarray(rng.integers(40, 200, (12, 16, 3), dtype=np.uint8))
    good.save(shoot / "000.jpg")
    for number in range(1, 194):
        shutil.copy(shoot / "000.jpg", shoot / f"{number:03}.jpg")
    (shoot / "truncated.jpg").write_bytes((shoot / "000.jpg").read_bytes()[:200])
    (shoot / "empty.png").touch()
    (shoot / "words.jpg").write_text("hello")
    good.save(shoot / "really-a-png.jpg", format="png")
    (shoot / "folder.jpg").mkdir()
    good.save(shoot / "ünïcödé 🎨 [red].jpg")
    good.save(shoot / ("long" * 60 + ".jpg"))
    order = MatchOrder(inputs=[shoot], to=[shoot / "000.jpg"], out=tmp_path / "out", settings=QUICK, workers=2)

    record, _ = work(order)

    assert len(record.entries) == 197
    assert {Path(one.path).name for one in record.failures} == {"truncated.jpg", "empty.png", "words.jpg"}
    assert all(Path(one.path).name in one.reason for one in record.failures)
