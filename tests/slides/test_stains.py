"""Stain vectors against published values and known mixtures."""

from __future__ import annotations

import numpy as np
import pytest
from skimage.color import hed2rgb, rgb2hed, rgb_from_hed

from hueferry.colour.encoding import SRGB
from hueferry.errors import InputError
from hueferry.slides.density import Density, Light
from hueferry.slides.stains import SEPARATIONS, exchange, robust_plane, sparse_factors, unmix

RUIFROK = np.array([[0.65, 0.70, 0.29], [0.07, 0.99, 0.11], [0.27, 0.57, 0.78]])
UNIT = RUIFROK / np.linalg.norm(RUIFROK, axis=1, keepdims=True)
WHITE = Density(np.ones(3), SRGB)


def mixture(seed: int, vectors: np.ndarray, count: int = 20_000) -> np.ndarray:
    """Two stains, each often absent, so that both edges of the fan are populated."""
    rng = np.random.default_rng(seed)
    amounts = rng.gamma(2.0, 0.35, (count, 2)) + 0.15
    only = rng.integers(0, 3, count)
    amounts[only == 0, 1] *= 0.02
    amounts[only == 1, 0] *= 0.02
    return amounts @ vectors + rng.normal(0, 0.002, (count, 3))


@pytest.mark.parametrize(
    ("code", "density"), [(25.5, 1.0), (128, 0.29933), (240, 0.026329), (254, 0.0017065), (24, 1.02633)]
)
def test_density_is_the_decadic_logarithm_of_what_glass_lets_through(code: float, density: float) -> None:
    """Beer–Lambert, closed form, I0 = 255."""
    assert WHITE.of(np.full((1, 3), code / 255)) == pytest.approx(np.full((1, 3), density), abs=6e-6)


def test_the_vectors_are_those_of_ruifrok_and_johnston() -> None:
    """Ruifrok & Johnston (2001) as in scikit-image; the angle of haematoxylin to eosin is 39.39°."""
    assert pytest.approx(rgb_from_hed) == RUIFROK
    assert np.degrees(np.arccos(UNIT[0] @ UNIT[1])) == pytest.approx(39.39, abs=0.005)


@pytest.mark.parametrize(
    ("amounts", "rgb"),
    [
        ((1, 0, 0), (56.942, 50.740, 130.631)),
        ((0, 1, 0), (216.989, 26.008, 197.870)),
        ((0.6, 0.4, 0), (97.238, 38.837, 154.234)),
        ((0.5, 0.3, 0.2), (101.420, 44.143, 118.230)),
    ],
)
def test_amounts_of_stain_give_light_and_come_back(amounts: tuple[float, ...], rgb: tuple[float, ...]) -> None:
    codes = WHITE.codes(np.array([amounts]) @ UNIT)

    assert 255 * codes == pytest.approx(np.array([rgb]), abs=6e-4)
    assert unmix(WHITE.of(codes), UNIT) == pytest.approx(np.array([amounts]), abs=1e-12)


def test_unmixing_agrees_with_scikit_image() -> None:
    """Its amounts are decadic densities over 6, and cut at zero."""
    rgb = np.array([[[0.5, 0.3, 0.6]]])

    assert unmix(WHITE.of(rgb[0]), RUIFROK) / 6 == pytest.approx(rgb2hed(rgb)[0], abs=1e-8)
    assert hed2rgb(rgb2hed(rgb)) == pytest.approx(rgb, abs=1e-12)


@pytest.mark.parametrize("light", list(Light))
def test_density_and_codes_are_inverse(light: Light) -> None:
    codes = np.random.default_rng(0).uniform(0.05, 1, (500, 3))
    scale = Density(np.array([0.9, 0.92, 0.88]), SRGB, light)

    assert scale.codes(scale.of(codes)) == pytest.approx(codes, abs=1e-7)


@pytest.mark.parametrize("separate", SEPARATIONS.values(), ids=SEPARATIONS.keys())
@pytest.mark.parametrize("vectors", [UNIT[:2], UNIT[[0, 2]]], ids=["HE", "HD"])
def test_known_stains_are_found_within_four_degrees(separate, vectors: np.ndarray) -> None:
    found = separate(mixture(3, vectors), least=0.02)

    angles = np.degrees(np.arccos(np.clip((found.vectors * vectors).sum(axis=1), -1, 1)))
    assert angles.max() < 4


@pytest.mark.parametrize("separate", SEPARATIONS.values(), ids=SEPARATIONS.keys())
def test_a_slide_normalised_to_its_own_vectors_is_unchanged(separate) -> None:
    density = mixture(4, UNIT[:2])
    stains = separate(density)

    codes = WHITE.codes(exchange(density, stains, stains))

    assert 255 * np.abs(codes - WHITE.codes(density)).max() < 1e-6


def test_the_residual_is_signed_and_completes_the_density() -> None:
    density = mixture(5, UNIT[:2])
    stains = robust_plane(density)

    residual = stains.residual(density)

    assert stains.amounts(density) @ stains.vectors + residual == pytest.approx(density, abs=1e-12)
    assert residual.min() < 0 < residual.max()


def test_sparse_factors_are_unit_and_not_negative() -> None:
    """Vahadane et al. (2016): columns of W of unit length, W >= 0."""
    vectors = sparse_factors(mixture(6, UNIT[:2])).vectors

    assert np.linalg.norm(vectors, axis=1) == pytest.approx(np.ones(2))
    assert (vectors >= 0).all()


def test_two_reference_sets_are_not_interchangeable() -> None:
    """The commonly quoted haematoxylin and eosin stand 22.315° apart, those of Ruifrok & Johnston 39.39°."""
    quoted = np.array([[0.5626, 0.7201, 0.4062], [0.2159, 0.8012, 0.5581]])
    quoted /= np.linalg.norm(quoted, axis=1, keepdims=True)

    found = robust_plane(mixture(7, quoted))

    assert np.degrees(np.arccos(quoted[0] @ quoted[1])) == pytest.approx(22.315, abs=0.01)
    assert found.angle == pytest.approx(22.3, abs=2)


def test_one_stain_alone_is_not_taken_for_two() -> None:
    density = np.random.default_rng(0).gamma(2, 0.4, (5000, 1)) @ UNIT[:1]

    with pytest.raises(InputError, match="one stain only"):
        robust_plane(density)


def test_pale_slides_have_no_stains() -> None:
    with pytest.raises(InputError, match="only 0 pixels"):
        robust_plane(np.full((100, 3), 0.01))
