"""From two pictures to a certified table, on real photographs."""

from __future__ import annotations

import attrs
import numpy as np
import pytest

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import xyz_to_lab
from hueferry.errors import InputError
from hueferry.fitting.fit import Fit, fit_picture
from hueferry.fitting.reference import Reference
from hueferry.fitting.settings import Aim, Only, Settings
from hueferry.maps.method import Method
from hueferry.picture import Picture
from photographs import NAMES, in_other_light, photograph, picture

METHODS = list(Method)


def fitted(source: np.ndarray, reference: np.ndarray, **settings: object) -> Fit:
    return fit_picture(picture(source), [Reference.of_picture(picture(reference), "reference")], Settings(**settings))


def difference(first: np.ndarray, second: np.ndarray) -> float:
    lab = [xyz_to_lab(SRGB.to_xyz(pixels.reshape(-1, 3) / 255)) for pixels in (first, second)]
    return float(delta_e_2000(*lab).mean())


@pytest.mark.parametrize("method", METHODS)
def test_a_picture_adopting_its_own_palette_is_unchanged(method: Method) -> None:
    source = photograph("china", step=4)

    result = fitted(source, source, aim=Aim.ADOPT, method=method).apply(picture(source))

    assert difference(result.pixels, source) < 0.1


@pytest.mark.parametrize("name", NAMES)
def test_a_picture_that_agrees_with_itself_is_unchanged(name: str) -> None:
    source = photograph(name, step=4)

    result = fitted(source, source).apply(picture(source))

    assert difference(result.pixels, source) < 0.1


@pytest.mark.parametrize("name", ["chelsea", "flower"])
@pytest.mark.parametrize("method", METHODS)
def test_adopting_brings_the_palette_over_within_the_certificate(method: Method, name: str) -> None:
    """The same scene in another light: a tenth of the distance at most is left, of the Gaussian map four tenths."""
    source = photograph(name, step=4)

    fit = fitted(source, in_other_light(source), aim=Aim.ADOPT, method=method)

    assert fit.certificate.folds == 0
    assert fit.certificate.largest_gain <= 2.5 + 1e-6
    assert fit.cost_after.sliced_w2 <= (0.4 if method is Method.GAUSSIAN else 0.1) * fit.cost_before.sliced_w2


def test_agreeing_undoes_a_change_of_light() -> None:
    source = photograph("china")
    wanted = in_other_light(source)

    fit = fitted(source, wanted)
    result = fit.apply(picture(source))

    assert fit.evidence.basis.value == "pairs"
    assert difference(result.pixels, wanted) < 0.15 * difference(source, wanted)


def test_strangers_are_left_alone_and_it_is_said() -> None:
    fit = fitted(photograph("chelsea"), photograph("rocket"))

    assert fit.moved < 1.0
    assert fit.sentences[0].endswith(".")


def test_strength_is_the_share_of_the_way() -> None:
    source = photograph("china", step=4)
    other = in_other_light(source)

    none, half, whole = (fitted(source, other, strength=s).moved for s in (0.0, 0.5, 1.0))

    assert none == pytest.approx(0, abs=1e-3)
    assert half == pytest.approx(whole / 2, rel=0.15)


def test_no_strength_is_no_change_to_the_bit() -> None:
    source = photograph("coffee", step=4)
    deep = Picture(source.astype(np.uint16) * 257, SRGB, bits=16)

    fit = fit_picture(
        deep, [Reference.of_picture(picture(in_other_light(source)), "other")], Settings(aim=Aim.ADOPT, strength=0.0)
    )

    np.testing.assert_array_equal(fit.apply(deep).pixels, deep.pixels)


@pytest.mark.parametrize(("only", "kept"), [(Only.TONE, slice(1, 3)), (Only.CHROMA, slice(0, 1))])
def test_one_part_alone_is_corrected(only: Only, kept: slice) -> None:
    from hueferry.colour.spaces import linear_srgb_to_oklab
    from hueferry.colour.transfer import srgb_to_linear

    source = photograph("china", step=4)

    result = fitted(source, in_other_light(source), only=only, aim=Aim.ADOPT, method=Method.GAUSSIAN).apply(
        picture(source)
    )
    before, after = (linear_srgb_to_oklab(srgb_to_linear(p.reshape(-1, 3) / 255)) for p in (source, result.pixels))

    assert np.abs(after[:, kept] - before[:, kept]).mean() < 0.004


def test_grays_stay_gray_if_asked() -> None:
    source = photograph("china", step=4)

    fit = fitted(source, in_other_light(source), keep_neutrals=True)

    assert fit.certificate.neutral_drift < 1.0


def test_held_colours_stay() -> None:
    source = photograph("china")
    hold = np.zeros(source.shape[:2], dtype=bool)
    hold[:40, :40] = True  # sky

    fit = fit_picture(
        picture(source), [Reference.of_picture(picture(in_other_light(source)), "r")], Settings(), hold=hold
    )
    result = fit.apply(picture(source)).pixels

    assert difference(result[:40, :40], source[:40, :40]) < 1.5
    assert difference(result, source) > 2.0


@pytest.mark.parametrize(
    "pixels",
    [
        np.zeros((8, 8, 3), np.uint8),
        np.full((8, 8, 3), 255, np.uint8),
        np.full((1, 1, 3), 90, np.uint8),
        np.repeat(np.arange(64, dtype=np.uint8)[None, :, None], 3, axis=2),
        np.array([[[200, 30, 30], [30, 30, 200]]] * 2, np.uint8),
    ],
    ids=["black", "white", "one pixel", "gray ramp", "two colours"],
)
@pytest.mark.parametrize("aim", list(Aim))
def test_degenerate_pictures_are_no_trouble(pixels: np.ndarray, aim: Aim) -> None:
    fit = fitted(pixels, photograph("coffee", step=8), aim=aim)

    result = fit.apply(picture(pixels)).pixels

    assert result.shape == pixels.shape
    assert np.isfinite(fit.table.lattice).all()
    assert fit.certificate.folds == 0
    if aim is Aim.AGREE:
        assert difference(result, pixels) < 1.0
        assert fit.sentences[0].startswith("Nothing was changed")


def test_a_border_that_is_masked_changes_nothing() -> None:
    inner = photograph("coffee", step=4)
    height, width = inner.shape[:2]
    framed = np.zeros((height * 2, width, 3), np.uint8)
    framed[:height] = inner
    mask = np.zeros(framed.shape[:2], dtype=bool)
    mask[:height] = True
    reference = [Reference.of_picture(picture(in_other_light(inner)), "r")]
    settings = Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN)

    plain = fit_picture(picture(inner), reference, settings)
    masked = fit_picture(picture(framed), reference, settings, mask=mask)

    np.testing.assert_allclose(masked.table.lattice, plain.table.lattice, atol=1e-5)


def test_several_references_share_the_say() -> None:
    source = photograph("china")
    warm, cool = in_other_light(source), in_other_light(source, gains=(0.8, 1.0, 1.2))
    references = [Reference.of_picture(picture(p), n) for p, n in ((warm, "warm"), (cool, "cool"))]

    fit = fit_picture(picture(source), references, Settings())

    assert len(fit.evidence.influence) == 2
    assert sum(fit.evidence.influence) == pytest.approx(1)


def test_there_must_be_a_reference() -> None:
    with pytest.raises(InputError, match="no reference"):
        fit_picture(picture(photograph("coffee", step=8)), [], Settings())


def test_settings_are_checked() -> None:
    with pytest.raises(ValueError, match="strength"):
        Settings(strength=1.5)
    assert Settings().gain_cap(8) == 2.5
    assert Settings().gain_cap(16) == 4.0
    assert attrs.evolve(Settings(), max_gain=3.0).gain_cap(8) == 3.0
