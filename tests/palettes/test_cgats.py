"""Saved palettes: what is written comes back, others' files are read, and damage is a clear error."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from hueferry.colour.spaces import oklab_to_lab
from hueferry.errors import PaletteError
from hueferry.palettes.cgats import cgats_text, palette_from_cgats, read_cgats
from hueferry.palettes.palette import Palette


def some_palette(size: int = 40) -> Palette:
    generator = np.random.default_rng(3)
    colours = np.stack(
        [generator.uniform(0.05, 1, size), generator.uniform(-0.2, 0.2, size), generator.uniform(-0.2, 0.2, size)], 1
    )
    weights = generator.dirichlet(np.ones(size))
    return Palette(colours, weights / weights.sum())


def test_a_saved_palette_comes_back(tmp_path: Path) -> None:
    palette = some_palette()
    path = tmp_path / "house.txt"
    path.write_text(cgats_text(palette), encoding="utf-8")
    back = read_cgats(path)
    assert np.abs(oklab_to_lab(back.colours) - oklab_to_lab(palette.colours)).max() < 1e-6
    assert np.abs(back.weights - palette.weights).max() < 1e-10
    assert cgats_text(palette) == cgats_text(palette)


def test_the_white_of_the_pcs_is_white_in_the_working_space() -> None:
    text = (
        "CGATS.17\nBEGIN_DATA_FORMAT\nSAMPLE_ID\tLAB_A LAB_B LAB_L\nEND_DATA_FORMAT\nBEGIN_DATA\n1 0 0 100\nEND_DATA\n"
    )
    palette = palette_from_cgats(text)
    assert palette.weights.tolist() == [1.0]
    # D50 white is L = 1 without colour in Oklab: Ottosson (2020), A perceptual color space for image processing.
    assert np.abs(palette.colours - [[1.0, 0.0, 0.0]]).max() < 1e-3


@pytest.mark.parametrize(
    ("old", "new", "complaint"),
    [
        ("LAB_A", "CMYK_C", "no field LAB_A"),
        ("NUMBER_OF_SETS 40", "NUMBER_OF_SETS 41", "promises 41"),
        ("END_DATA\n", "", "not CGATS"),
        ("\n1 ", "\n1 9", "checksum"),
    ],
)
def test_a_changed_file_is_refused_in_words(old: str, new: str, complaint: str) -> None:
    with pytest.raises(PaletteError, match=complaint):
        palette_from_cgats(cgats_text(some_palette()).replace(old, new))


@pytest.mark.parametrize("number", ["nan", "inf", "1e999", "1e30", "white"])
def test_what_is_no_colour_is_refused(number: str) -> None:
    text = f"BEGIN_DATA_FORMAT\nLAB_L LAB_A LAB_B\nEND_DATA_FORMAT\nBEGIN_DATA\n{number} 0 0\nEND_DATA\n"
    with pytest.raises(PaletteError):
        palette_from_cgats(text)


def test_a_thousand_damaged_files_are_an_error_or_a_palette(tmp_path: Path) -> None:
    whole = cgats_text(some_palette(12)).encode()
    generator = np.random.default_rng(11)
    path = tmp_path / "damaged.txt"
    refused = 0
    for _ in range(1000):
        damaged = bytearray(whole)
        for place in generator.integers(0, len(damaged), generator.integers(1, 6)):
            damaged[place] = generator.integers(0, 256)
        path.write_bytes(damaged[: generator.integers(1, len(damaged) + 1)])
        try:
            assert len(read_cgats(path)) >= 1
        except PaletteError:
            refused += 1
    assert refused > 500
