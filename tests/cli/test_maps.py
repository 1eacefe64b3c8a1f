"""`fit`, `apply` and `check`: a map outlives the run that made it."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.cli.main import run
from photographs import in_other_light, photograph


@pytest.fixture
def place(tmp_path: Path) -> Path:
    Image.fromarray(photograph("china")).save(tmp_path / "plain.png")
    Image.fromarray(in_other_light(photograph("china"))).save(tmp_path / "warm.png")
    return tmp_path


def test_a_saved_map_gives_the_bytes_that_match_gives(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    plain, warm = str(place / "plain.png"), str(place / "warm.png")

    assert run(["fit", plain, "--to", warm, "--out", str(place / "m.clf")]) == 0
    assert run(["apply", str(place / "m.clf"), plain, "--out", str(place / "applied")]) == 0
    assert run(["match", plain, "--to", warm, "--out", str(place / "matched"), "--quiet"]) == 0

    assert (place / "applied/plain.png").read_bytes() == (place / "matched/plain.png").read_bytes()
    assert "no fold" in capsys.readouterr().out


def test_no_strength_is_no_change_to_the_bit(place: Path) -> None:
    plain, warm = str(place / "plain.png"), str(place / "warm.png")

    assert run(["fit", plain, "--to", warm, "--out", str(place / "m.clf"), "--strength", "0"]) == 0
    assert run(["apply", str(place / "m.clf"), plain, "--out", str(place / "o")]) == 0

    np.testing.assert_array_equal(np.asarray(Image.open(place / "o/plain.png")), photograph("china"))


def test_check_certifies_a_map_and_verifies_a_run(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    plain, warm = str(place / "plain.png"), str(place / "warm.png")
    run(["fit", plain, "--to", warm, "--out", str(place / "m.clf")])
    run(["match", plain, "--to", warm, "--out", str(place / "run"), "--quiet"])
    capsys.readouterr()

    assert run(["check", str(place / "m.clf"), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["certificate"]["folds"] == 0
    assert run(["check", str(place / "run")]) == 0
    assert "as the record says" in capsys.readouterr().out

    (place / "run/plain.png").write_bytes(b"changed")
    (place / "warm.png").unlink()
    assert run(["check", str(place / "run"), "--json"]) == 1
    differences = json.loads(capsys.readouterr().out)["differences"]
    assert len(differences) == 2
    assert any("plain.png differs" in one for one in differences)
    assert any("warm.png is gone" in one for one in differences)


def test_a_map_that_is_none_is_the_callers_fault(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (place / "m.clf").write_text("no map")

    assert run(["apply", str(place / "m.clf"), str(place / "plain.png"), "--out", str(place / "o")]) == 2
    assert run(["check", str(place / "m.clf")]) == 2
    assert run(["fit", str(place / "plain.png"), "--to", str(place / "warm.png"), "--out", str(place / "m.txt")]) == 2
    assert "m.clf" in capsys.readouterr().err
    assert not (place / "o").exists()
