"""Two slides of one field: the change of stain is read from the same places, wherever they lie in either picture."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import ndimage

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import xyz_to_lab
from hueferry.slides.fit import fit_slide
from hueferry.slides.look import look_at
from hueferry.slides.reference import reference_of
from hueferry.slides.same_field import same_field
from hueferry.tables.lookup import look_up
from slides.sections import HED, Pixels8, rendered, restain


def moved(pixels: Pixels8) -> Pixels8:
    """The same field on another scanner: turned by 2 degrees, a tenth smaller, and shifted by parts of a pixel."""
    angle = np.radians(2.0)
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]]) / 0.9
    planes = [
        ndimage.affine_transform(pixels[..., k].astype(float), turn, offset=(7.3, -4.6), order=3, mode="nearest")
        for k in range(3)
    ]
    return np.asarray(np.rint(np.clip(np.stack(planes, axis=2), 0, 255)), dtype=np.uint8)


def error(pixels: Pixels8, wanted: Pixels8, table=None) -> float:
    """Mean ΔE00 to the truth, of every fourth pixel."""
    codes = pixels[::4, ::4].reshape(-1, 3) / 255
    result = codes if table is None else np.clip(look_up(table, codes), 0, 1)
    labs = [xyz_to_lab(SRGB.to_xyz(part)) for part in (result, wanted[::4, ::4].reshape(-1, 3) / 255)]
    return float(delta_e_2000(labs[0], labs[1]).mean())


@pytest.mark.parametrize("seed", [900, 901, 902])
def test_one_section_on_two_scanners_comes_out_alike(seed: int) -> None:
    source = rendered(seed)
    change = restain(np.random.default_rng([seed, 5]), (0, 1), 0.95)

    fit = fit_slide(look_at(source, SRGB), reference_of([look_at(moved(change(source)), SRGB)]))

    assert fit.basis == "pairs"
    assert error(source, change(source), fit.table) < max(0.15 * error(source, change(source)), 0.7)


def test_a_fold_on_one_of_the_slides_does_not_matter() -> None:
    source = rendered(903)
    change = restain(np.random.default_rng([903, 5]), (0, 1), 0.95)
    folded = change(source)
    folded[100:180, 200:330] = (folded[100:180, 200:330].astype(float) ** 2 / 255).astype(np.uint8)  # twice as thick

    fit = fit_slide(look_at(source, SRGB), reference_of([look_at(folded, SRGB)]))

    assert error(source, change(source), fit.table) < 0.7


def test_different_fields_are_told_apart() -> None:
    look, other = look_at(rendered(904), SRGB), look_at(rendered(905), SRGB)

    assert same_field(look, reference_of([other])) is None


def test_the_same_places_are_read() -> None:
    look = look_at(rendered(906), SRGB)
    field = same_field(look, reference_of([look_at(moved(rendered(906)), SRGB)]))

    assert field is not None
    close = field.weights > np.median(field.weights)
    assert np.median(np.abs(field.source - field.reference)[close]) < 0.01
    assert np.quantile(field.source @ HED[0], 0.9) - np.quantile(field.source @ HED[0], 0.1) > 0.2
