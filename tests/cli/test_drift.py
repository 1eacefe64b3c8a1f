"""`drift add` and `drift chart` from the command line."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.cli.main import run


@pytest.fixture
def frame(tmp_path: Path) -> np.ndarray:
    rng = np.random.default_rng(1)
    pixels = np.repeat(np.repeat(rng.integers(40, 215, (6, 8, 3)), 12, axis=0), 12, axis=1)
    Image.fromarray(pixels.astype(np.uint8)).save(tmp_path / "control.png")
    return pixels


def add(tmp_path: Path, pixels: np.ndarray, day: int, *, device: str = "scanner 2") -> int:
    Image.fromarray(np.clip(pixels, 0, 255).astype(np.uint8)).save(tmp_path / "today.png")
    when = f"2026-{1 + day // 28:02d}-{1 + day % 28:02d}"
    names = [str(tmp_path / name) for name in ("log.sqlite", "today.png")]
    return run(["drift", "add", *names, "--to", str(tmp_path / "control.png"), "--device", device, "--when", when])


def test_a_scanner_that_turns_yellow_is_found_out(
    frame: np.ndarray, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    rng = np.random.default_rng(2)
    for week in range(20):
        yellower = np.array([0.0, 0.0, -1.0]) * max(0, week - 11)
        assert add(tmp_path, frame + yellower + rng.integers(-1, 2, 3), 7 * week) == 0
    capsys.readouterr()

    assert run(["drift", "chart", str(tmp_path / "log.sqlite"), "--out", str(tmp_path / "c.svg"), "--json"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert run(["drift", "chart", str(tmp_path / "log.sqlite"), "--out", str(tmp_path / "c.csv")]) == 0

    assert found["state"] == "drifting"
    assert "yellower" in found["sentence"]
    assert (tmp_path / "c.svg").read_text().startswith("<svg")
    assert len((tmp_path / "c.csv").read_text().splitlines()) > 20


def test_several_devices_are_not_mixed(frame: np.ndarray, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    add(tmp_path, frame, 1, device="one")
    add(tmp_path, frame, 2, device="two")

    assert run(["drift", "chart", str(tmp_path / "log.sqlite")]) == 2
    assert "choose one with --device" in capsys.readouterr().err


@pytest.mark.usefixtures("frame")
@pytest.mark.parametrize("name", ["missing.sqlite", "control.png"])
def test_what_is_no_log_is_refused(name: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["drift", "chart", str(tmp_path / name)]) == 2
    assert name in capsys.readouterr().err
