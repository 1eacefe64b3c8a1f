"""The command line as its users and their scripts meet it."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.cli.main import run
from photographs import in_other_light, photograph


@pytest.fixture
def shoot(tmp_path: Path) -> Path:
    folder = tmp_path / "shoot"
    folder.mkdir()
    Image.fromarray(in_other_light(photograph("china"))).save(folder / "warm.jpg", quality=95)
    Image.fromarray(photograph("china")).save(folder / "plain.png")
    Image.fromarray(photograph("china")).save(tmp_path / "hero.jpg", quality=95)
    return folder


def test_match_writes_pictures_record_sheet_and_page(
    shoot: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "out"

    code = run(["match", str(shoot), "--to", str(tmp_path / "hero.jpg"), "--out", str(out)])

    captured = capsys.readouterr()
    record = json.loads((out / "record.json").read_text())
    assert code == 0
    assert {path.name for path in out.iterdir()} == {
        "warm.jpg",
        "plain.png",
        "record.json",
        "contact_sheet.jpg",
        "report.html",
        ".hueferry",
    }
    assert "warm.jpg" in captured.out
    assert max(len(line) for line in captured.out.splitlines()) <= 80
    assert "ΔE00" in captured.err
    warm = next(entry for entry in record["entries"] if entry["source"]["path"].endswith("warm.jpg"))
    assert warm["numbers"]["cost_after"]["w2"] < 0.5 * warm["numbers"]["cost_before"]["w2"]
    assert warm["numbers"]["certificate"]["folds"] == 0


def test_json_is_json_and_everything_else_is_elsewhere(
    shoot: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    code = run(
        ["match", str(shoot / "warm.jpg"), "--to", str(shoot / "plain.png"), "--out", str(tmp_path / "o"), "--json"]
    )

    assert code == 0
    assert json.loads(capsys.readouterr().out)["schema"] == "hueferry/record-1"


def test_the_same_run_gives_the_same_bytes(shoot: Path, tmp_path: Path) -> None:
    for name in ("one", "two"):
        run(["match", str(shoot), "--to", str(tmp_path / "hero.jpg"), "--out", str(tmp_path / name), "--quiet"])

    for file in ("warm.jpg", "plain.png", "record.json"):
        assert (tmp_path / "one" / file).read_bytes() == (tmp_path / "two" / file).read_bytes()


def test_originals_and_earlier_results_are_not_overwritten(shoot: Path, tmp_path: Path) -> None:
    before = (shoot / "warm.jpg").read_bytes()
    hero, out = str(tmp_path / "hero.jpg"), str(tmp_path / "out")

    assert run(["match", str(shoot), "--to", hero, "--out", str(shoot), "--overwrite"]) == 2
    assert run(["match", str(shoot), "--to", hero, "--out", out]) == 0
    (tmp_path / "out" / "warm.jpg").write_bytes(b"somebody's work")
    assert run(["match", str(shoot), "--to", hero, "--out", out]) == 2
    assert (tmp_path / "out" / "warm.jpg").read_bytes() == b"somebody's work"
    assert run(["match", str(shoot), "--to", hero, "--out", out, "--overwrite"]) == 0
    assert (tmp_path / "out" / "warm.jpg").read_bytes()[:3] == b"\xff\xd8\xff"
    assert (shoot / "warm.jpg").read_bytes() == before


def test_without_a_reference_the_pictures_meet_in_the_middle(
    shoot: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    code = run(["match", str(shoot), "--out", str(tmp_path / "o"), "--aim", "adopt", "--method", "gaussian", "--json"])

    record = json.loads(capsys.readouterr().out)
    assert code == 0
    assert "common palette of 2 pictures" in record["sentences"][0]
    assert all(
        entry["numbers"]["cost_after"]["sliced_w2"] < entry["numbers"]["cost_before"]["sliced_w2"]
        for entry in record["entries"]
    )


def test_one_bad_file_does_not_stop_the_others(shoot: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (shoot / "broken.jpg").write_bytes((shoot / "warm.jpg").read_bytes()[:3000])
    (shoot / "empty.png").touch()
    (shoot / "text.jpg").write_text("not a picture")
    (shoot / "folder.jpg").mkdir()

    code = run(["match", str(shoot), "--to", str(tmp_path / "hero.jpg"), "--out", str(tmp_path / "o"), "--json"])

    record = json.loads(capsys.readouterr().out)
    assert code == 1
    assert len(record["entries"]) == 2
    assert {Path(failure["path"]).name for failure in record["failures"]} == {"broken.jpg", "empty.png", "text.jpg"}
    assert all(failure["reason"] for failure in record["failures"])


BAD = {
    "missing": lambda _: None,
    "empty": lambda path: path.touch(),
    "folder": lambda path: path.mkdir(),
    "text": lambda path: path.write_text("hello"),
    "truncated": lambda path: path.write_bytes(b"\xff\xd8\xff\xe0\0\x10JFIF\0\1\1\0\0\1\0\1\0\0"),
    "cmyk": lambda path: Image.new("CMYK", (9, 9)).save(path, "jpeg"),
}


@pytest.mark.parametrize("kind", BAD)
@pytest.mark.parametrize("place", ["picture", "reference"])
def test_bad_input_is_one_sentence_and_leaves_nothing_behind(
    kind: str, place: str, shoot: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    bad = tmp_path / "bad.jpg"
    BAD[kind](bad)
    good = shoot / "plain.png"
    source, reference = (bad, good) if place == "picture" else (good, bad)

    code = run(["match", str(source), "--to", str(reference), "--out", str(tmp_path / "o")])

    captured = capsys.readouterr()
    assert code == 2
    assert "bad.jpg" in captured.err
    assert "Traceback" not in captured.err
    assert not list(tmp_path.glob("o/**/*.*"))


def test_one_pixel_is_a_picture_too(shoot: Path, tmp_path: Path) -> None:
    Image.new("RGB", (1, 1), (120, 80, 40)).save(tmp_path / "dot.png")

    assert (
        run(["match", str(tmp_path / "dot.png"), "--to", str(shoot / "plain.png"), "--out", str(tmp_path / "o")]) == 0
    )
    assert np.asarray(Image.open(tmp_path / "o" / "dot.png")).shape == (1, 1, 3)


@pytest.mark.parametrize(
    ("arguments", "complaint"),
    [
        (["match", "x.jpg", "--to", "y.jpg"], "--out"),
        (["match", "x.jpg", "--out", "o", "--method", "magic"], "no method"),
        (["match", "x.jpg", "--out", "o", "--strength", "2"], "strength"),
        (["cost", "x.jpg"], "only one was given"),
        (["nonsense"], "nonsense"),
        (["report", "nowhere"], "holds no record"),
    ],
)
def test_a_wrong_command_line_is_the_callers_fault(
    arguments: list[str], complaint: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run([*arguments, "--json"] if arguments[0] in ("match", "cost") else arguments) == 2

    captured = capsys.readouterr()
    assert complaint in captured.err
    if arguments[0] in ("match", "cost"):
        error = json.loads(captured.out)
        assert error["schema"] == "hueferry/error-1"
        assert error["exit_code"] == 2


def test_cost_keeps_its_published_keys(shoot: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code = run(["cost", str(shoot / "plain.png"), str(shoot / "warm.jpg"), "--json"])

    table = json.loads(capsys.readouterr().out)
    pair = table["pairs"][0]
    assert code == 0
    assert table["schema"] == "hueferry/cost-1"
    assert {"a", "b", "w1", "w2", "sliced_w2", "gaussian_w2", "sinkhorn_divergence"} <= set(pair)
    assert {"w1", "w2", "sliced_w2", "gaussian_w2", "sinkhorn_divergence"} <= set(table["units"])
    assert pair["w1"] <= pair["w2"]


def test_cost_of_three_is_a_matrix(shoot: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    three = [str(shoot / "plain.png"), str(shoot / "warm.jpg"), str(tmp_path / "hero.jpg")]

    assert run(["cost", *three]) == 0
    text = capsys.readouterr().out
    assert run(["cost", *three, "--json"]) == 0
    table = json.loads(capsys.readouterr().out)

    assert "Standing apart" in text
    assert max(len(line) for line in text.splitlines()) <= 100
    assert len(table["pairs"]) == 3
    assert len(table["comparison"]["distances"]) == 3


def test_help_loads_nothing_heavy() -> None:
    code = (
        "import sys; from hueferry.cli.main import run; run(['--help']); "
        "heavy = {'scipy', 'ot', 'cv2', 'PIL', 'tifffile', 'imagecodecs', 'PyOpenColorIO', 'dask', 'jinja2'}; "
        "print(sorted(heavy & set(sys.modules)), file=sys.stderr)"
    )

    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)

    assert "match" in done.stdout
    assert done.stderr.strip() == "[]"


def test_a_picture_in_which_nothing_is_to_change_is_copied_byte_for_byte(shoot: Path, tmp_path: Path) -> None:
    other = tmp_path / "stranger.jpg"
    Image.fromarray(photograph("rocket")).save(other, quality=80)

    assert run(["match", str(other), "--to", str(shoot / "plain.png"), "--out", str(tmp_path / "o"), "--quiet"]) == 0
    assert (tmp_path / "o" / "stranger.jpg").read_bytes() == other.read_bytes()
