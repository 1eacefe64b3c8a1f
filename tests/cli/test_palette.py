"""`palette`: a saved palette stands for the picture it was made of."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from PIL import Image

from hueferry.cli.main import run
from photographs import in_other_light, photograph


def test_a_saved_palette_is_a_reference(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Image.fromarray(photograph("china")).save(tmp_path / "plain.png")
    Image.fromarray(in_other_light(photograph("china"))).save(tmp_path / "warm.png")
    saved, plain = str(tmp_path / "house.txt"), str(tmp_path / "plain.png")

    assert run(["palette", str(tmp_path / "warm.png"), "--out", saved, "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["colours"] > 1
    assert run(["palette", plain, "--out", saved]) == 2
    adopt = ["match", plain, "--to", saved, "--aim", "adopt", "--out", str(tmp_path / "o"), "--quiet", "--json"]
    assert run(adopt) == 0
    numbers = json.loads(capsys.readouterr().out)["entries"][0]["numbers"]
    assert numbers["cost_after"]["w2"] < 0.5 * numbers["cost_before"]["w2"]


def test_a_palette_needs_a_name_that_says_so(tmp_path: Path) -> None:
    Image.fromarray(photograph("china")).save(tmp_path / "plain.png")
    assert run(["palette", str(tmp_path / "plain.png"), "--out", str(tmp_path / "house.jpg")]) == 2
    assert not (tmp_path / "house.jpg").exists()
