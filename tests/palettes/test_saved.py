"""Saved palettes in either form: what is written comes back, several make one, and damage is a clear error."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import numpy as np
import pytest

from hueferry.colour.spaces import oklab_to_lab
from hueferry.errors import OutputError, PaletteError
from hueferry.palettes.json_form import json_text, palette_from_json
from hueferry.palettes.palette import Palette
from hueferry.palettes.saved import merge, palette_text, read_palette


def some_palette(size: int = 40, *, seed: int = 3, pixels: int = 1000) -> Palette:
    generator = np.random.default_rng(seed)
    colours = generator.uniform([0.05, -0.2, -0.2], [1, 0.2, 0.2], (size, 3))
    return Palette(colours, generator.dirichlet(np.ones(size)), spread=0.0125, pixels=pixels)


@pytest.mark.parametrize("name", ["house.txt", "house.CGATS", "house.json"])
def test_a_saved_palette_comes_back_in_the_form_of_its_name(name: str, tmp_path: Path) -> None:
    palette, path = some_palette(), tmp_path / name
    path.write_text(palette_text(palette, path), encoding="utf-8")

    back = read_palette(path)

    assert np.abs(oklab_to_lab(back.colours) - oklab_to_lab(palette.colours)).max() < 1e-6
    assert np.abs(back.weights - palette.weights).max() < 1e-10


def test_json_keeps_what_cgats_has_no_field_for() -> None:
    back = palette_from_json(json_text(some_palette()))

    assert (back.spread, back.pixels) == (0.0125, 1000)
    assert json_text(some_palette()) == json_text(some_palette())


def test_both_forms_hold_the_same_numbers(tmp_path: Path) -> None:
    palette = some_palette()
    for name in ("a.txt", "a.json"):
        (tmp_path / name).write_text(palette_text(palette, tmp_path / name), encoding="utf-8")

    text, other = read_palette(tmp_path / "a.txt"), read_palette(tmp_path / "a.json")

    np.testing.assert_array_equal(text.colours, other.colours)
    np.testing.assert_array_equal(text.weights, other.weights)


def test_the_checksum_of_json_is_what_its_description_says() -> None:
    body = json.loads(json_text(some_palette()))
    stated = body.pop("sha256")

    assert stated == hashlib.sha256(json.dumps(body, sort_keys=True, separators=(",", ":")).encode()).hexdigest()


def with_checksum(**changes: object) -> str:
    """The text of a palette with some keys changed, and the checksum that belongs to them."""
    body = json.loads(json_text(some_palette(2))) | changes
    body.pop("sha256")
    digest = hashlib.sha256(json.dumps(body, sort_keys=True, separators=(",", ":")).encode()).hexdigest()
    return json.dumps(body | {"sha256": digest})


@pytest.mark.parametrize(
    ("text", "complaint"),
    [
        ("{", "not JSON"),
        ("[" * 100_000, "not JSON"),
        ("[]", "no palette of pictures"),
        ("9" * 5000, "not JSON"),
        ('{"schema": "hueferry/house-1"}', "for stain --to"),
        (json_text(some_palette()).replace("0.0125", "0.0126"), "checksum"),
        (with_checksum(version=2), "not of version 1"),
        (with_checksum(extra=1), "not of version 1"),
        (with_checksum(weights=[0.5]), "as many weights"),
        (with_checksum(weights=[0.5, 0.6]), "no shares"),
        (with_checksum(weights=[1.5, -0.5]), "no shares"),
        (with_checksum(weights=["many", 0.5]), "no number"),
        (with_checksum(weights=[]), "none at all"),
        (with_checksum(colours=[[1, 2], [3, 4]]), "three numbers"),
        (with_checksum(colours=[[1, 2, 3], [3, 4]]), "no number"),
        (with_checksum(colours=[[1, 2, 3], [3, 4, 1e9]]), "no colours"),
        (with_checksum(colours={}), "no number"),
        (with_checksum(spread="wide"), "spread"),
        (with_checksum(pixels=-1), "number of pixels"),
        (json_text(some_palette()).replace("0.0125", "NaN"), "NaN, which is no number"),
        (json_text(some_palette(2)).replace("0.0125", "1e999"), "checksum|spread"),
    ],
)
def test_a_broken_file_is_refused_in_words(text: str, complaint: str) -> None:
    with pytest.raises(PaletteError, match=complaint):
        palette_from_json(text)


def test_names_and_files_that_are_no_palettes_are_refused(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="name it so"):
        palette_text(some_palette(), tmp_path / "house.jpg")
    with pytest.raises(PaletteError, match="ends in"):
        read_palette(tmp_path / "house.jpg")
    with pytest.raises(PaletteError, match="cannot be read"):
        read_palette(tmp_path / "none.json")
    (tmp_path / "binary.json").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(PaletteError, match="no text"):
        read_palette(tmp_path / "binary.json")


def test_a_thousand_damaged_files_are_an_error_or_a_palette(tmp_path: Path) -> None:
    """Bytes changed, cut off, doubled and swapped between files; the checksum lets none through that differs."""
    forms = {"d.txt": palette_text(some_palette(12), Path("d.txt")), "d.json": json_text(some_palette(12))}
    generator = np.random.default_rng(12)
    refused = 0
    for number in range(1000):
        name = ("d.txt", "d.json")[number % 2]
        damaged = bytearray(forms[name].encode())
        for place in generator.integers(0, len(damaged), generator.integers(1, 6)):
            damaged[place] = generator.integers(0, 256)
        start, end = np.sort(generator.integers(0, len(damaged), 2))
        if number % 3 == 0:
            damaged[start:end] = b""
        elif number % 7 == 0:
            damaged[start:start] = damaged[start:end] * int(generator.integers(1, 5))
        (tmp_path / name).write_bytes(damaged)
        try:
            assert len(read_palette(tmp_path / name)) >= 1
        except PaletteError:
            refused += 1
    assert refused > 900


def test_merged_palettes_are_the_palette_of_all_pixels() -> None:
    """Means and covariances as those of the pixels together: the mixture of both, by the law of total variance."""
    first, second = some_palette(30, seed=1, pixels=3000), some_palette(50, seed=2, pixels=1000)

    both = merge([first, second])

    mean = 0.75 * first.mean + 0.25 * second.mean
    apart = first.mean - second.mean
    wanted = 0.75 * first.covariance + 0.25 * second.covariance + 0.75 * 0.25 * np.outer(apart, apart)
    np.testing.assert_allclose(both.mean, mean, atol=1e-14)
    np.testing.assert_allclose(both.covariance, wanted, atol=1e-14)
    assert both.pixels == 4000
    assert len(both) == 80


def test_merging_sums_what_is_the_same_and_knows_no_order() -> None:
    one, other = some_palette(20, seed=1), some_palette(20, seed=2)

    np.testing.assert_allclose(merge([one, one]).weights.sum(), 1)
    assert len(merge([one, one])) == 20
    np.testing.assert_array_equal(merge([one, other]).colours, merge([other, one]).colours)
    np.testing.assert_allclose(merge([one, other]).weights, merge([other, one]).weights, atol=1e-16)


def test_palettes_of_unknown_size_count_the_same_and_many_colours_become_few() -> None:
    first, second = some_palette(900, seed=1, pixels=0), some_palette(900, seed=2, pixels=500)

    both = merge([first, second])

    np.testing.assert_allclose(both.mean, (first.mean + second.mean) / 2, atol=1e-12)
    assert both.pixels == 0
    assert len(both) <= 1024
    assert both.spread > first.spread
    with pytest.raises(PaletteError, match="at least one"):
        merge([])
