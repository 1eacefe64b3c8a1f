"""`stain` from the command line, on the rendered sections whose truth is known."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import tifffile
from PIL import Image

from hueferry.cli.main import run
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import xyz_to_lab
from hueferry.samples.sections import render_section

SIDE = 320


@pytest.fixture
def slides(tmp_path: Path) -> Path:
    for name, section in (("a", ("run-a", "scanner-1")), ("b", ("run-b", "scanner-2"))):
        Image.fromarray(render_section(*section, side=SIDE)).save(tmp_path / f"{name}.png")
    return tmp_path


def difference(first: np.ndarray, second: np.ndarray) -> float:
    lab = [xyz_to_lab(SRGB.to_xyz(pixels.reshape(-1, 3) / 255)) for pixels in (first, second)]
    return float(delta_e_2000(*lab).mean())


def test_a_restained_section_comes_back_to_its_first_staining(slides: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = slides / "out"

    code = run(
        ["stain", str(slides / "b.png"), "--to", str(slides / "a.png"), "--out", str(out), "--packing", "deflate"]
    )

    captured = capsys.readouterr()
    truth = render_section("run-a", "scanner-1", side=SIDE)
    result = tifffile.imread(out / "b.ome.tif")
    record = json.loads((out / "record.json").read_text())
    assert code == 0
    assert difference(result, truth) < 0.5 * difference(render_section("run-b", "scanner-2", side=SIDE), truth)
    assert "not validated for diagnosis" in captured.err
    assert any("not validated for diagnosis" in sentence for sentence in record["sentences"])
    assert max(len(line) for line in captured.out.splitlines()) <= 80
    page = (out / "report.html").read_text(encoding="utf-8")
    assert page.count("not validated for diagnosis") >= 2
    assert f"<td>{record['entries'][0]['numbers']['cost_delta_e_after']:.2f}</td>" in page
    assert "data:image/jpeg" in page
    assert "https://" not in page
    before = page
    assert run(["report", str(out)]) == 0
    assert (out / "report.html").read_text(encoding="utf-8") == before
    # Glass of the corner, within two codes of its target.
    assert np.abs(result[:12, :12].mean(axis=(0, 1)) - truth[:12, :12].mean(axis=(0, 1))).max() < 2


def test_measuring_writes_no_slide(slides: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = slides / "out"

    code = run(
        ["stain", str(slides / "b.png"), "--to", str(slides / "a.png"), "--out", str(out), "--measure-only", "--json"]
    )

    record = json.loads(capsys.readouterr().out)
    assert code == 0
    assert record["entries"][0]["output"] is None
    assert record["entries"][0]["numbers"]["before"]["tissue_share"] > 0.3
    assert sorted(path.name for path in out.iterdir()) == [".hueferry", "record.json", "report.html"]


@pytest.mark.parametrize(
    ("extra", "complaint"),
    [(["--layout", "spiral"], "no layout"), (["--packing", "magic"], "no packing"), (["--light", "moon"], "no light")],
)
def test_unknown_words_are_the_callers_fault(
    extra: list[str], complaint: str, slides: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(["stain", str(slides / "b.png"), "--out", str(slides / "o"), *extra]) == 2
    assert complaint in capsys.readouterr().err


def test_a_photograph_of_the_dark_is_no_slide(slides: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rng = np.random.default_rng(1)
    dark = np.clip(rng.normal(8, 4, (200, 200, 3)), 0, 255).astype(np.uint8)
    dark[80:90, 80:90] = (0, 255, 40)
    Image.fromarray(dark).save(slides / "dark.png")

    code = run(["stain", str(slides / "dark.png"), "--to", str(slides / "a.png"), "--out", str(slides / "o")])

    assert code == 2
    assert "dark.png" in capsys.readouterr().err
