"""Scene-linear light as codes: a closed form, its inverse, and the standards' primaries."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hueferry.colour.encoding import BT2020, LINEAR_SRGB
from hueferry.colour.scene import MOST_LIGHT, REC_709, WHITE_CODE, scene_linear, to_codes, to_light, white_code
from hueferry.errors import InputError

REC_2020 = (0.708, 0.292, 0.170, 0.797, 0.131, 0.046, 0.3127, 0.3290)


@given(st.floats(-1e30, 1e30, allow_nan=False))
def test_light_comes_back_from_its_code(light: float) -> None:
    assert float(to_light(to_codes(np.array(light)))) == pytest.approx(light, rel=1e-11, abs=1e-17)


def test_ends_and_white_are_those_of_the_formula() -> None:
    """log2(1 + 128 x) / 14: by hand, 0 at 0, log2(129) / 14 at 1, and 1 at (2**14 − 1) / 128."""
    assert to_codes(np.array([0.0, 1.0, 16383 / 128])).tolist() == pytest.approx([0.0, 7.011227255423254 / 14, 1.0])
    assert pytest.approx(7.011227255423254 / 14) == WHITE_CODE
    assert pytest.approx(127.9921875) == MOST_LIGHT


def test_every_half_comes_back_from_a_code_in_single_precision() -> None:
    halves = np.arange(0x7C00, dtype=np.uint16).view(np.float16).astype(np.float32)

    again = to_light(to_codes(halves).astype(np.float32)).astype(np.float32).astype(np.float16)

    np.testing.assert_array_equal(again.astype(np.float32), halves)


@pytest.mark.parametrize(("chromaticities", "expected"), [(REC_709, LINEAR_SRGB), (REC_2020, BT2020)])
def test_primaries_give_the_matrices_of_the_standards(chromaticities: tuple[float, ...], expected: object) -> None:
    encoding = scene_linear(chromaticities)
    light = np.random.default_rng(0).random((50, 3)) * 9

    np.testing.assert_allclose(encoding.to_xyz(to_codes(light)), light @ expected.matrix.T, rtol=1e-9)
    np.testing.assert_allclose(encoding.light.to_xyz(light), light @ expected.matrix.T, rtol=1e-9)
    np.testing.assert_allclose(to_light(encoding.from_xyz(light @ expected.matrix.T)), light, rtol=1e-9)


def test_white_ends_where_its_encoding_says() -> None:
    assert white_code(scene_linear(REC_709)) == WHITE_CODE
    assert white_code(BT2020) == 1.0


@pytest.mark.parametrize(
    "chromaticities",
    [(0.3,) * 8, (0.64, 0.33, 0.3, 0.6, 0.15, 0.06, 0.3, 0.0), (np.nan,) * 8, (1e9,) * 8, (0.64, 0.33), (0.0,) * 8],
)
def test_primaries_without_a_gamut_are_refused(chromaticities: tuple[float, ...]) -> None:
    with pytest.raises(InputError, match="span no gamut"):
        scene_linear(chromaticities)
