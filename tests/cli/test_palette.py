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


def test_saved_palettes_are_compared_like_their_pictures(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The same figures, but no noise floor, for whatever form and mixture."""
    Image.fromarray(photograph("china")).save(tmp_path / "plain.png")
    Image.fromarray(in_other_light(photograph("china"))).save(tmp_path / "warm.png")
    names = {name: str(tmp_path / name) for name in ("plain.png", "warm.png", "p.json", "w.txt")}
    assert run(["palette", names["plain.png"], "--out", names["p.json"]]) == 0
    assert run(["palette", names["warm.png"], "--out", names["w.txt"]]) == 0
    capsys.readouterr()

    pairs = []
    for first, second in (("plain.png", "warm.png"), ("p.json", "w.txt"), ("p.json", "warm.png")):
        assert run(["cost", names[first], names[second], "--json"]) == 0
        pairs.append(json.loads(capsys.readouterr().out)["pairs"][0])
    assert run(["cost", names["p.json"], names["w.txt"], names["plain.png"], "--out", str(tmp_path / "page")]) == 0

    assert [pair["noise"] is None for pair in pairs] == [False, True, True]
    for pair in pairs[1:]:
        assert pair["w2"] == pytest.approx(pairs[0]["w2"], abs=1e-5)
        assert "does not say how much of it is noise" in pair["verdict"]


def test_palettes_are_merged_by_their_pixels(tmp_path: Path) -> None:
    Image.new("RGB", (30, 10), (255, 0, 0)).save(tmp_path / "red.png")
    Image.new("RGB", (10, 10), (0, 0, 255)).save(tmp_path / "blue.png")
    for name in ("red", "blue"):
        assert run(["palette", str(tmp_path / f"{name}.png"), "--out", str(tmp_path / f"{name}.json")]) == 0
    both = ["palette", str(tmp_path / "red.json"), str(tmp_path / "blue.json"), "--out", str(tmp_path / "both.json")]
    assert run([*both, "--merge"]) == 0

    saved = json.loads((tmp_path / "both.json").read_text())

    assert sorted(saved["weights"]) == [0.25, 0.75]
    assert saved["pixels"] == 400
