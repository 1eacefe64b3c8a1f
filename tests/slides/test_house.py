"""House palettes: what several slides have in common, saved and read again."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.cli.main import run
from hueferry.colour.encoding import DISPLAY_P3, SRGB
from hueferry.errors import InputError, PaletteError
from hueferry.slides.density import Light
from hueferry.slides.fit import fit_slide
from hueferry.slides.gather import find_reference
from hueferry.slides.house import house_text, read_house
from hueferry.slides.look import Look, look_at
from hueferry.slides.reference import SlideReference, reference_of
from hueferry.tables.lookup import look_up
from slides.sections import HED, rendered, restain


@pytest.fixture(scope="module")
def looks() -> list[Look]:
    """Eight sections, each of a staining run and a scanner of its own."""
    changes = [restain(np.random.default_rng([n, 8]), (0, 1), 0.95) for n in range(8)]
    return [look_at(change(rendered(50 + n)), SRGB) for n, change in enumerate(changes)]


@pytest.fixture(scope="module")
def house(looks: list[Look]) -> SlideReference:
    return reference_of(looks)


def middle(reference: SlideReference) -> np.ndarray:
    """The mean density, the stain vectors, and the log strengths of a reference, one after the other."""
    density = reference.sample(SRGB).density.mean(axis=0)
    return np.concatenate([density, reference.stains.vectors.ravel(), np.log(reference.stains.strengths)])


def plain_mean(looks: Sequence[Look]) -> np.ndarray:
    """The same, averaged without any care for outliers."""
    return np.mean([middle(reference_of([look])) for look in looks], axis=0)


def test_dropping_a_slide_moves_the_palette_less_than_the_slides_differ(
    looks: list[Look], house: SlideReference
) -> None:
    """A mean of 8 moves by a seventh of a slide's own distance; three sevenths leave room for a median's steps."""
    each = np.array([middle(reference_of([look])) for look in looks])
    spread = np.linalg.norm(each - middle(house), axis=1).max()

    moved = [np.linalg.norm(middle(reference_of(looks[:n] + looks[n + 1 :])) - middle(house)) for n in range(8)]

    assert max(moved) < 3 / 7 * spread


def test_an_outlier_moves_the_palette_less_than_it_moves_a_mean(looks: list[Look], house: SlideReference) -> None:
    odd = look_at(rendered(60, 2.0 * HED[[1, 2]]), SRGB)

    moved = middle(reference_of([*looks, odd])) - middle(house)
    mean_moved = plain_mean([*looks, odd]) - plain_mean(looks)

    assert np.linalg.norm(moved) < 0.5 * np.linalg.norm(mean_moved)
    assert np.linalg.norm(moved[3:9]) < 0.02  # about one degree of a stain vector


def test_a_saved_palette_corrects_as_the_slides_do(house: SlideReference, tmp_path: Path) -> None:
    path = tmp_path / "house.json"
    path.write_text(house_text(house), encoding="ascii")
    other = look_at(rendered(70), SRGB)

    codes = other.codes[::50]
    results = [look_up(fit_slide(other, reference).table, codes) for reference in (house, find_reference([path]))]

    assert 255 * np.abs(results[0] - results[1]).max() < 0.1
    assert house_text(read_house(path)) == path.read_text(encoding="ascii")


def test_the_text_carries_schema_version_and_hash(house: SlideReference) -> None:
    data = json.loads(house_text(house))
    said = data.pop("sha256")

    canonical = json.dumps(data, sort_keys=True, separators=(",", ":"))
    assert said == hashlib.sha256(canonical.encode()).hexdigest()
    assert data["schema"] == "hueferry/house-1"
    assert data["version"]
    assert sum(data["shares"]) == pytest.approx(1)


def test_an_encoding_without_a_profile_is_saved_in_srgb(tmp_path: Path) -> None:
    wide = reference_of([look_at(rendered(3), DISPLAY_P3)])
    path = tmp_path / "wide.json"
    path.write_text(house_text(wide), encoding="ascii")

    back = read_house(path)

    assert back.sample(SRGB).density == pytest.approx(wide.sample(SRGB).density, abs=2e-3)


@pytest.mark.parametrize(
    ("change", "complaint"),
    [
        (lambda text: text[:1000], "not JSON"),
        (lambda text: text.replace("house-1", "house-9"), "schema"),
        (lambda text: text.replace('"glass_seen":true', '"glass_seen":false'), "changed"),
        (lambda _: "[" * 100_000, "not JSON"),
        (lambda _: "[]", "schema"),
    ],
)
def test_a_changed_file_is_refused(change, complaint: str, house: SlideReference, tmp_path: Path) -> None:
    path = tmp_path / "house.json"
    path.write_text(change(house_text(house)), encoding="ascii")

    with pytest.raises(PaletteError, match=complaint):
        read_house(path)


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("glass", [0.0, 0.5, 0.5]),
        ("glass", [float("nan")] * 3),
        ("colours", []),
        ("colours", [[1, 2, 3]]),
        ("colours", [[1, 2, 70000, 0]]),
        ("colours", [[1, 2, 10**30, 0]]),
        ("shares", [2.0]),
        ("light", "moon"),
        ("profile", "AAAA"),
        ("profile", 7),
        ("stains", {"vectors": [], "strengths": []}),
    ],
)
def test_hostile_values_with_a_right_hash_are_refused(
    name: str, value: object, house: SlideReference, tmp_path: Path
) -> None:
    data = json.loads(house_text(house)) | {name: value}
    data.pop("sha256")
    canonical = json.dumps(data, sort_keys=True, separators=(",", ":"))
    path = tmp_path / "house.json"
    path.write_text(json.dumps(data | {"sha256": hashlib.sha256(canonical.encode()).hexdigest()}), encoding="ascii")

    with pytest.raises(PaletteError, match="no house palette"):
        read_house(path)


def test_a_house_palette_stands_alone_and_in_its_own_light(house: SlideReference, tmp_path: Path) -> None:
    path = tmp_path / "house.json"
    path.write_text(house_text(house), encoding="ascii")

    with pytest.raises(InputError, match="stands alone"):
        find_reference([path, tmp_path])
    with pytest.raises(InputError, match="encoded values"):
        find_reference([path], light=Light.LINEAR)
    with pytest.raises(PaletteError, match="cannot be read"):
        read_house(tmp_path / "absent.json")


def test_slides_are_brought_to_a_saved_palette(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for n in range(3):
        Image.fromarray(rendered(80 + n)).save(tmp_path / f"{n}.png")
    change = restain(np.random.default_rng(4), (0, 1), 0.95)
    Image.fromarray(change(rendered(84))).save(tmp_path / "other.png")
    house, out = str(tmp_path / "house.json"), tmp_path / "out"
    sections = [str(tmp_path / f"{n}.png") for n in range(3)]

    assert run(["palette", "--stain", *sections, "--out", house, "--json"]) == 0
    assert len(json.loads(capsys.readouterr().out)["shares"]) == 3
    assert run(["palette", "--stain", *sections, "--out", str(tmp_path / "house.txt")]) == 2
    assert "json" in capsys.readouterr().err
    assert (
        run(["stain", str(tmp_path / "other.png"), "--to", house, "--out", str(out), "--measure-only", "--json"]) == 0
    )
    record = json.loads(capsys.readouterr().out)
    numbers = record["entries"][0]["numbers"]
    assert numbers["cost_density_after"] < 0.7 * numbers["cost_density_before"]
    assert record["references"][0]["sha256"] == hashlib.sha256(Path(house).read_bytes()).hexdigest()
