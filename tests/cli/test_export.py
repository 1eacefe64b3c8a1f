"""`export`: a decision list with its distance from the map."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.cli.main import run
from hueferry.tables.build import sample_table
from hueferry.tables.clf import clf_text
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
