"""`export`: a decision list with its distance from the map."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.cli.main import run
from hueferry.tables.build import sample_table
from hueferry.tables.clf import clf_text, read_clf
from photographs import photograph


def test_a_map_within_reach_is_exported_closely(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Image.fromarray(photograph("china")).save(tmp_path / "p.png")
    table = sample_table(lambda codes: codes * np.array([0.9, 0.95, 0.8]), size=5)
    (tmp_path / "m.clf").write_text(clf_text(table, encoding="sRGB"), encoding="utf-8")
    order = ["export", str(tmp_path / "m.clf"), "--over", str(tmp_path / "p.png"), "--json", "--out"]

    assert run([*order, str(tmp_path / "m.cc")]) == 0
    assert json.loads(capsys.readouterr().out)["mean"] < 0.05
    assert "<Slope>" in (tmp_path / "m.cc").read_text(encoding="utf-8")
    assert run([*order, str(tmp_path / "m.xyz")]) == 2


@pytest.mark.parametrize("options", [[], ["--abstract"], ["--over", "p.png"]], ids=["link", "abstract", "over"])
def test_a_map_becomes_a_profile_with_its_distance(
    options: list[str], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Image.fromarray(photograph("china")).save(tmp_path / "p.png")
    table = sample_table(lambda codes: codes * np.array([0.9, 0.95, 0.8]), size=17)
    (tmp_path / "m.clf").write_text(clf_text(table, encoding="sRGB"), encoding="utf-8")
    chosen = [str(tmp_path / one) if one == "p.png" else one for one in options]

    code = run(["export", str(tmp_path / "m.clf"), "--out", str(tmp_path / "m.icc"), "--json", *chosen])

    said = json.loads(capsys.readouterr().out)
    assert code == 0
    assert said["kind"] == ("abstract" if "--abstract" in options else "device link")
    assert said["mean"] < 0.3
    assert (tmp_path / "m.icc").read_bytes()[36:40] == b"acsp"


def test_a_map_is_rewritten_at_another_size(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = sample_table(lambda codes: codes**1.1, size=33)
    (tmp_path / "m.clf").write_text(clf_text(table, encoding="sRGB"), encoding="utf-8")

    code = run(["export", str(tmp_path / "m.clf"), "--out", str(tmp_path / "s.clf"), "--size", "9", "--json"])

    assert code == 0
    assert 0 < json.loads(capsys.readouterr().out)["largest"] < 2
    assert read_clf(tmp_path / "s.clf").size == 9


def test_a_decision_list_without_a_picture_suits_all_codes_alike(tmp_path: Path) -> None:
    table = sample_table(lambda codes: codes * 0.9, size=5)
    (tmp_path / "m.clf").write_text(clf_text(table, encoding="sRGB"), encoding="utf-8")

    assert run(["export", str(tmp_path / "m.clf"), "--out", str(tmp_path / "m.cc")]) == 0
    assert "0.9" in (tmp_path / "m.cc").read_text(encoding="utf-8")
