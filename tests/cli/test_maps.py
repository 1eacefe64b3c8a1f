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


CURVE = """<?xml version="1.0" encoding="UTF-8"?>
<ProcessList id="curve" compCLFversion="3.0">
  <Exponent inBitDepth="32f" outBitDepth="32f" style="monCurveFwd">
    <ExponentParams exponent="2.4" offset="0.055"/>
  </Exponent>
</ProcessList>
"""
GRADE = """<ColorCorrectionCollection xmlns="urn:ASC:CDL:v1.01">
  <ColorCorrection id="same"/>
  <ColorCorrection id="half"><SOPNode>
    <Slope>.5 .5 .5</Slope><Offset>0 0 0</Offset><Power>1 1 1</Power></SOPNode>
  </ColorCorrection>
</ColorCorrectionCollection>
"""


def test_process_lists_of_others_are_applied_and_checked(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The decoding curve of IEC 61966-2-1 gives every 8-bit code its linear light, rounded."""
    (place / "curve.clf").write_text(CURVE, encoding="utf-8")

    assert run(["apply", str(place / "curve.clf"), str(place / "plain.png"), "--out", str(place / "o")]) == 0
    assert "exact within 32-bit rounding" in capsys.readouterr().err
    assert run(["check", str(place / "curve.clf"), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["misfit"]["largest"] < 5e-4

    codes = photograph("china") / 255
    light = np.where(codes <= 0.04045, codes / 12.92, ((codes + 0.055) / 1.055) ** 2.4)
    assert np.abs(np.asarray(Image.open(place / "o/plain.png")) - 255 * light).max() <= 0.502


def test_a_correction_of_a_collection_is_applied(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    grades, plain = place / "grades.ccc", str(place / "plain.png")
    grades.write_text(GRADE, encoding="utf-8")

    assert run(["apply", str(grades), plain, "--out", str(place / "none")]) == 2
    assert "choose one by its id: 'same', 'half'" in capsys.readouterr().err
    for name, factor in (("same", 1.0), ("half", 0.5)):
        assert run(["apply", str(grades), plain, "--correction", name, "--out", str(place / name)]) == 0
        result = np.asarray(Image.open(place / name / "plain.png"))
        assert np.abs(result - factor * photograph("china")).max() <= 0.501
    assert run(["check", str(grades), "--correction", "half"]) == 0


def test_maps_are_put_together_and_undone(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """There and back again in one go, and in two: the picture, within one code for each rounding."""
    plain, lift = str(place / "plain.png"), str(place / "lift.cc")
    Path(lift).write_text(
        "<ColorCorrection><SOPNode><Slope>.8 .8 .7</Slope><Offset>.1 .1 .1</Offset><Power>1 1 1</Power></SOPNode>"
        "</ColorCorrection>",
        encoding="utf-8",
    )
    assert run(["apply", lift, plain, "--out", str(place / "lifted")]) == 0
    assert run(["apply", lift, str(place / "lifted/plain.png"), "--undo", "--out", str(place / "back")]) == 0
    assert "knows the way back from 45 %" in capsys.readouterr().err  # 0.8 · 0.8 · 0.7 of all colours
    assert run(["apply", lift, plain, "--then", lift, "--out", str(place / "twice")]) == 0
    assert "2 maps put together: the table is exact" in capsys.readouterr().err

    picture = photograph("china") / 255
    back, twice = (np.asarray(Image.open(place / name / "plain.png")) for name in ("back", "twice"))
    assert np.abs(back - 255 * picture).max() <= 0.5 / 0.7 + 0.51
    wanted = (picture * [0.8, 0.8, 0.7] + 0.1) * [0.8, 0.8, 0.7] + 0.1
    assert np.abs(twice - 255 * wanted).max() <= 0.51


def test_check_draws_what_a_map_does(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    grade, drawing = str(place / "grades.ccc"), place / "drawing.png"
    (place / "grades.ccc").write_text(GRADE, encoding="utf-8")
    check = ["check", grade, "--correction", "half", "--preview"]
    assert run(["palette", str(place / "warm.png"), "--out", str(place / "warm.json")]) == 0

    assert run([*check, str(drawing), "--over", str(place / "warm.json")]) == 0
    by_palette = drawing.read_bytes()
    assert run([*check, str(drawing), "--over", str(place / "warm.png")]) == 2
    assert run([*check, str(drawing), "--over", str(place / "warm.png"), "--overwrite"]) == 0
    with Image.open(drawing) as opened:
        assert opened.size == (1560, 1666)
    assert len(by_palette) == pytest.approx(len(drawing.read_bytes()), rel=0.2)
    assert run([*check, str(place / "plain.clf")]) == 2
    assert run(["check", grade, "--over", str(place / "warm.png")]) == 2
    assert "say where with --preview" in capsys.readouterr().err


def test_a_correction_is_chosen_only_where_there_are_several(place: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (place / "curve.clf").write_text(CURVE, encoding="utf-8")
    (place / "grades.ccc").write_text(GRADE, encoding="utf-8")
    apply = ["apply", str(place / "curve.clf"), str(place / "plain.png"), "--correction", "half"]

    assert run([*apply, "--out", str(place / "o")]) == 2
    assert "hold corrections to choose from" in capsys.readouterr().err
    assert run([*apply, "--then", str(place / "grades.ccc"), "--out", str(place / "o")]) == 0
