"""Outputs are planned before anything is written."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import pytest

from hueferry.errors import InputError, OutputError
from hueferry.series.plan import plan_errands


def find(paths: Sequence[Path]) -> list[Path]:
    found = []
    for path in paths:
        found += sorted(child for child in path.rglob("*") if child.is_file()) if path.is_dir() else [path]
    return found


@pytest.fixture
def shoot(tmp_path: Path) -> Path:
    folder = tmp_path / "shoot"
    (folder / "north").mkdir(parents=True)
    for name in ("a.jpg", "a.tif", "north/a.jpg"):
        (folder / name).touch()
    return folder


def test_a_folder_keeps_its_structure(shoot: Path, tmp_path: Path) -> None:
    errands = plan_errands([shoot], tmp_path / "out", find=find)

    assert [errand.output.relative_to(tmp_path / "out").as_posix() for errand in errands] == [
        "a.jpg",
        "a.tif",
        "north/a.jpg",
    ]


def test_names_that_differ_only_in_case_or_unicode_form_get_a_number(tmp_path: Path) -> None:
    first, second = tmp_path / "1", tmp_path / "2"
    first.mkdir(), second.mkdir()
    files = [first / "caf\u00e9.jpg", second / "CAFE\u0301.JPG"]
    for file in files:
        file.touch()

    errands = plan_errands(files, tmp_path / "out", find=find)

    assert [errand.output.name for errand in errands] == ["caf\u00e9.jpg", "CAFE\u0301-2.JPG"]


def test_a_picture_named_twice_is_done_once(shoot: Path, tmp_path: Path) -> None:
    errands = plan_errands([shoot, shoot / "a.jpg"], tmp_path / "out", find=find)

    assert len(errands) == 3


def test_an_output_is_never_an_input(shoot: Path) -> None:
    with pytest.raises(OutputError, match="one of the originals"):
        plan_errands([shoot], shoot, find=find)


def test_no_picture_is_the_callers_fault(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no picture was found"):
        plan_errands([tmp_path], tmp_path / "out", find=find)
