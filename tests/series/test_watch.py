"""Pictures are done as they arrive complete."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import attrs
import pytest
from PIL import Image

from hueferry.errors import InputError
from hueferry.fitting.settings import Aim, Settings
from hueferry.jobs import match_files
from hueferry.maps.method import Method
from hueferry.series.match import MatchOrder
from hueferry.series.watch import Patience, watch
from photographs import in_other_light, photograph


@pytest.fixture
def order(tmp_path: Path) -> MatchOrder:
    (tmp_path / "shoot").mkdir()
    Image.fromarray(photograph("flower")[::6, ::6]).save(tmp_path / "hero.png")
    quick = Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN)
    return MatchOrder(inputs=[tmp_path / "shoot"], to=[tmp_path / "hero.png"], out=tmp_path / "out", settings=quick)


def picture(number: int, path: Path) -> bytes:
    gains = (1.3 - 0.1 * number, 1.0, 0.7 + 0.1 * number)
    Image.fromarray(in_other_light(photograph("flower"), gains=gains)[::6, ::6]).save(path)
    return path.read_bytes()


def test_pictures_are_done_when_they_are_complete(order: MatchOrder, tmp_path: Path) -> None:
    """A picture that arrives in two halves is not read before it has stayed as it is for some looks."""
    shoot = order.inputs[0]
    whole = picture(1, tmp_path / "source.png")
    seen: list[set[str]] = []

    def script() -> Iterator[bool]:
        picture(0, shoot / "a.png")
        yield True
        (shoot / "b.png").write_bytes(whole[:4000])
        yield True
        yield True
        (shoot / "b.png").write_bytes(whole)
        yield from [True] * 4
        yield False

    moments = script()

    def run(part: MatchOrder) -> None:
        record = match_files(part)
        assert not record.failures
        seen.append({Path(entry.source.path).name for entry in record.entries})

    runs = watch(order, run, patience=Patience(lambda: next(moments)))

    assert runs == 2
    assert seen == [{"a.png"}, {"a.png", "b.png"}]
    assert {path.name for path in order.out.glob("*.png")} == {"a.png", "b.png"}


def test_watching_without_a_reference_is_refused(order: MatchOrder) -> None:
    with pytest.raises(InputError, match="watching needs --to"):
        watch(attrs.evolve(order, to=[]), match_files, patience=Patience(lambda: False))


def test_the_command_ends_cleanly_when_it_is_told_to(order: MatchOrder) -> None:
    picture(0, order.inputs[0] / "a.png")
    command = ["match", str(order.inputs[0]), "--to", str(order.to[0]), "--out", str(order.out), "--watch"]
    code = f"import sys; from hueferry.cli.main import run; sys.exit(run({command!r}))"
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}

    with subprocess.Popen([sys.executable, "-c", code], stderr=subprocess.PIPE, text=True, env=environment) as process:
        assert process.stderr is not None
        lines = [process.stderr.readline(), process.stderr.readline()]  # watching, and the picture
        process.send_signal(signal.SIGTERM)
        lines.append(process.stderr.read())

    assert process.returncode == 0
    assert "a.png" in lines[1]
    assert "stopped" in lines[2]
    assert (order.out / "a.png").exists()
    assert (order.out / "record.json").exists()
