"""The correction against known changes of stain and scanner, on fresh seeds; the whole table runs in `truth.slides`."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.colour.encoding import SRGB
from hueferry.slides.density import Light
from hueferry.slides.fit import SlideAim, fit_slide
from hueferry.slides.look import look_at
from hueferry.slides.reference import reference_of
from hueferry.slides.register import FALLBACK, SPREADS, change_of
from hueferry.tables.lookup import look_up
from slides.sections import rendered
from truth.slides import judge, slide_cases


def test_the_same_field_meets_its_bar() -> None:
    scores = [judge(case) for case in slide_cases(("ihc", "section-21"), (31,), ("same",))]

    assert np.mean([score.after for score in scores]) <= 1.5
    assert all(score.after < score.none for score in scores)
    assert max(score.glass_codes for score in scores) <= 2


def test_halves_of_a_section_meet_their_bar() -> None:
    scores = [judge(case) for case in slide_cases(("section-22",), (33, 34), ("left/right", "top/bottom"))]

    assert np.mean([score.after for score in scores]) <= 3.0
    assert all(score.after < score.none for score in scores)
    assert max(score.glass_codes for score in scores) <= 2
    assert all(score.safe for score in scores)


def test_no_change_is_the_identity() -> None:
    density = np.random.default_rng(0).uniform(0, 2, (50, 3))

    assert change_of(np.zeros(len(SPREADS)), FALLBACK)(density) == pytest.approx(density, abs=1e-12)


@pytest.mark.parametrize(
    ("aim", "light", "most"),
    [
        (SlideAim.AGREE, Light.ENCODED, 1.0),
        (SlideAim.AGREE, Light.LINEAR, 1.0),
        (SlideAim.ADOPT, Light.ENCODED, 1.5),
        (SlideAim.ADOPT, Light.LINEAR, 5.0),  # dense tissue spreads over twice the density, and fewer palette colours
    ],
)
def test_a_slide_towards_itself_stays(aim: SlideAim, light: Light, most: float) -> None:
    look = look_at(rendered(6), SRGB, light=light)

    fit = fit_slide(look, reference_of([look]), aim=aim)

    moved = 255 * np.abs(look_up(fit.table, look.codes[::20]) - look.codes[::20]).max(axis=1)
    assert moved.mean() < 0.5
    assert np.quantile(moved, 0.99) < most
    assert fit.certificate.folds == 0


def test_pen_on_a_slide_hardly_moves_the_map() -> None:
    from hueferry.colour.difference import delta_e_2000
    from hueferry.colour.spaces import xyz_to_lab

    clean = rendered(8)
    marked = clean.copy()
    marked[:60, :165] = (30, 110, 60)  # 5 % of the area
    reference = reference_of([look_at(rendered(9), SRGB)])
    looks = [look_at(pixels, SRGB) for pixels in (clean, marked)]

    fits = [fit_slide(look, reference) for look in looks]

    codes = looks[0].codes[::50]
    labs = [xyz_to_lab(SRGB.to_xyz(np.clip(look_up(fit.table, codes), 0, 1))) for fit in fits]
    assert delta_e_2000(labs[0], labs[1]).mean() < 0.5


def test_no_strength_changes_nothing() -> None:
    look, other = look_at(rendered(6), SRGB), look_at(rendered(7, glass=0.85), SRGB)

    fit = fit_slide(look, reference_of([other]), strength=0.0)

    assert 255 * np.abs(look_up(fit.table, look.codes[::20]) - look.codes[::20]).max() < 0.6
