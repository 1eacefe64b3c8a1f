"""A run that is killed, or finds its disk full, leaves nothing half-written under a final name, and goes on later."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import attrs
import pytest
from PIL import Image

from hueferry.errors import OutputError
from hueferry.fitting.settings import Aim, Settings
from hueferry.jobs import match_files
from hueferry.maps.method import Method
from hueferry.series.match import MatchOrder
from photographs import in_other_light, photograph
from slides.sections import rendered, save_slide

DRIVER = Path(__file__).with_name("crash_driver.py")
TESTS = Path(__file__).parents[1]


@pytest.fixture
def order(tmp_path: Path) -> MatchOrder:
    shoot = tmp_path / "shoot"
    shoot.mkdir()
    for number in range(4):
        gains = (1.3 - 0.1 * number, 1.0, 0.7 + 0.1 * number)
        Image.fromarray(in_other_light(photograph("flower"), gains=gains)[::6, ::6]).save(shoot / f"{number}.png")
    Image.fromarray(photograph("flower")[::6, ::6]).save(tmp_path / "hero.png")
    quick = Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN)
    return MatchOrder(inputs=[shoot], to=[tmp_path / "hero.png"], out=tmp_path / "out", settings=quick)


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A disk of its own with room for a part of the results."""
    disk = tmp_path / "disk"
    disk.mkdir()
    mounting = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=100k", "none", str(disk)], capture_output=True, check=False
    )
    if mounting.returncode:
        pytest.skip("no file system can be mounted here")
    yield disk
    subprocess.run(["umount", str(disk)], check=True)


def drive(job: str, inputs: Path, reference: Path, out: Path, *, count: int) -> dict[str, Any]:
    """Kill a job `count` times, and return what was seen."""
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONPATH": os.pathsep.join([*sys.path, str(TESTS)])}
    words = [job, str(inputs), str(reference), str(out), "7", str(count)]
    driven = subprocess.run([sys.executable, DRIVER, *words], capture_output=True, env=environment, check=True)
    return dict(json.loads(driven.stdout))


def test_killed_at_twenty_random_moments(order: MatchOrder) -> None:
    seen = drive("match", order.inputs[0], order.to[0], order.out, count=20)

    assert seen["killed"] == 20
    assert seen["steps"] > 30
    assert seen["broken"] == []
    assert seen["differing"] == []
    assert seen["left"] == []


def test_a_full_disk_is_one_sentence_and_the_rest_follows_when_there_is_room(
    order: MatchOrder, small_disk: Path, tmp_path: Path
) -> None:
    whole = match_files(attrs.evolve(order, out=tmp_path / "roomy"))
    full = attrs.evolve(order, out=small_disk / "out")

    try:
        failures = [failure.reason for failure in match_files(full).failures]
    except OutputError as error:
        failures = [str(error)]
    named = [path for path in full.out.rglob("*.png") if ".hueferry" not in path.parts]
    half_written = [path.name for path in named if path.read_bytes() != (tmp_path / "roomy" / path.name).read_bytes()]
    subprocess.run(["mount", "-o", "remount,size=20m", str(small_disk)], check=True)
    later = match_files(full)

    assert failures
    assert all("No space left" in reason or "disk is full" in reason for reason in failures)
    assert half_written == []
    assert len(later.entries) == len(whole.entries) == 4
    assert not later.failures


@pytest.mark.parametrize("layout", ["ome", "zarr"])
def test_a_slide_killed_at_random_moments(layout: str, tmp_path: Path) -> None:
    seen = drive(f"stain-{layout}", *slides(tmp_path, "a"), count=4)

    assert seen.pop("killed") == 4
    assert seen.pop("steps") > 30
    assert not any(seen.values())


@pytest.mark.slow
@pytest.mark.parametrize("layout", ["ome", "flat", "zarr"])
def test_slides_killed_at_twenty_random_moments(layout: str, tmp_path: Path) -> None:
    seen = drive(f"stain-{layout}", *slides(tmp_path, "ab"), count=20)

    assert seen.pop("killed") == 20
    assert seen.pop("steps") > 30
    assert not any(seen.values())


def slides(folder: Path, names: str) -> tuple[Path, Path, Path]:
    """Write small pyramids, and return their folder, a reference, and a folder for results."""
    (folder / "slides").mkdir()
    for number, name in enumerate(names):
        save_slide(folder / "slides" / f"{name}.tif", rendered(11 + number, height=400, width=300))
    return folder / "slides", save_slide(folder / "reference.tif", rendered(13, height=300, width=300)), folder / "out"
