"""Colour against standards, papers and independent libraries; each value names its source."""

from __future__ import annotations

import numpy as np
import pytest
import skimage.color

import colour
from hueferry.colour.difference import delta_e_76, delta_e_2000
from hueferry.colour.encoding import BT2020, DISPLAY_P3, ROMM, SRGB
from hueferry.colour.spaces import (
    BRADFORD,
    SRGB_TO_XYZ_D50,
    SRGB_TO_XYZ_D65,
    WHITE_D50,
    WHITE_D65,
    adaptation,
    lab_to_oklab,
    linear_srgb_to_oklab,
    oklab_to_lab,
    oklab_to_linear_srgb,
    xyz_to_lab,
)
from hueferry.colour.transfer import linear_to_srgb, srgb_to_linear


@pytest.mark.parametrize(
    ("code", "linear"),
    [
        (0, 0.0),
        (1, 0.000303526984),
        (5, 0.001517634918),
        (10, 0.003035269835),
        (11, 0.003346535764),
        (12, 0.003676507324),
        (32, 0.014443843596),
        (64, 0.051269458374),
        (118, 0.181164244250),
        (128, 0.215860500114),
        (188, 0.502886458033),
        (255, 1.0),
    ],
)
def test_srgb_codes_decode_as_the_standard_says(code: int, linear: float) -> None:
    """IEC 61966-2-1:1999; values recomputed with colour-science."""
    assert srgb_to_linear(np.array([code / 255]))[0] == pytest.approx(linear, abs=1e-12)


@pytest.mark.parametrize(
    ("linear", "code"),
    [
        (0.001, 0.012920),
        (0.0031308, 0.040449936),
        (0.01, 0.099852822734),
        (0.05, 0.247800527993),
        (0.18, 0.461356129500),
        (0.5, 0.735356983052),
        (1.0, 1.0),
    ],
)
def test_linear_light_encodes_as_the_standard_says(linear: float, code: float) -> None:
    """IEC 61966-2-1:1999."""
    assert linear_to_srgb(np.array([linear]))[0] == pytest.approx(code, abs=1e-9)


def test_the_srgb_curve_comes_back_within_the_jump_of_its_rounded_constants() -> None:
    """The standard's constants leave a jump of about 3e-8 at the joint, so 1e-7 is as tight as it gets."""
    codes = np.linspace(-0.2, 1.3, 30_001)

    np.testing.assert_allclose(linear_to_srgb(srgb_to_linear(codes)), codes, atol=1e-7)


def test_the_srgb_matrix_follows_from_its_primaries() -> None:
    """BT.709 primaries with D65 (0.3127, 0.3290): derived by linear algebra, as colour-science does."""
    expected = [
        [0.4123907993, 0.3575843394, 0.1804807884],
        [0.2126390059, 0.7151686788, 0.0721923154],
        [0.0193308187, 0.1191947798, 0.9505321522],
    ]
    printed = [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]  # IEC 61966-2-1, table

    np.testing.assert_allclose(SRGB_TO_XYZ_D65, expected, atol=1e-9)
    np.testing.assert_allclose(SRGB_TO_XYZ_D65, printed, atol=5e-5)


def test_bradford_carries_d65_to_the_connection_space() -> None:
    """ICC.1:2022, annex E, with the white points of xy D65 and the ICC's D50."""
    expected = [
        [1.0478860, 0.0229188, -0.0502161],
        [0.0295818, 0.9904835, -0.0170787],
        [-0.0092519, 0.0150726, 0.7516781],
    ]

    np.testing.assert_allclose(adaptation(WHITE_D65, WHITE_D50), expected, atol=1e-7)


def test_bradford_agrees_with_colour_science() -> None:
    expected = colour.adaptation.matrix_chromatic_adaptation_VonKries(WHITE_D65, WHITE_D50, transform="Bradford")

    np.testing.assert_allclose(adaptation(WHITE_D65, WHITE_D50), expected, atol=1e-9)
    assert np.linalg.det(BRADFORD) == pytest.approx(np.linalg.det(colour.adaptation.CAT_BRADFORD), abs=1e-9)


def test_srgb_colorants_are_those_of_the_connection_space() -> None:
    """Computed from the two above; LittleCMS reads back the same to its s15Fixed16 rounding of 1e-5."""
    expected = np.transpose(
        [
            [0.4360413, 0.2224845, 0.0139202],
            [0.3851129, 0.7169051, 0.0970672],
            [0.1430458, 0.0606104, 0.7139126],
        ]
    )

    np.testing.assert_allclose(SRGB_TO_XYZ_D50, expected, atol=1e-7)


@pytest.mark.parametrize(
    ("encoding", "name"), [(DISPLAY_P3, "Display P3"), (BT2020, "ITU-R BT.2020"), (ROMM, "ROMM RGB"), (SRGB, "sRGB")]
)
def test_encodings_agree_with_colour_science(encoding: object, name: str) -> None:
    space = colour.RGB_COLOURSPACES[name].copy()
    space.use_derived_matrix_RGB_to_XYZ = True
    codes = np.random.default_rng(1).uniform(0, 1, (500, 3))
    white = colour.xy_to_XYZ(space.whitepoint)
    linear = space.cctf_decoding(codes)

    expected = linear @ space.matrix_RGB_to_XYZ.T @ adaptation(white, WHITE_D50).T

    # D50 has two forms (of its chromaticity, and the ICC's), and BT.2020 two precisions of its curve (1.099, 1.0993).
    tolerance = 2e-4 if encoding is BT2020 else 6e-5
    np.testing.assert_allclose(encoding.to_xyz(codes), expected, atol=tolerance)


@pytest.mark.parametrize(
    ("rgb", "lab"),
    [
        ((255, 0, 0), (54.2896, 80.8144, 69.8897)),
        ((0, 255, 0), (87.8194, -79.2749, 80.9927)),
        ((0, 0, 255), (29.5659, 68.2862, -112.0329)),
        ((0, 255, 255), (90.6664, -50.6631, -14.9610)),
        ((255, 0, 255), (60.1673, 93.5467, -60.5027)),
        ((255, 255, 0), (97.6074, -15.7479, 93.3913)),
        ((128, 128, 128), (53.5850, 0, 0)),
        ((255, 128, 0), (67.8164, 45.4947, 74.8388)),
    ],
)
def test_cielab_of_srgb_colours_relative_to_d50(rgb: tuple[int, ...], lab: tuple[float, ...]) -> None:
    """CIE 15 / ISO 11664-4 after Bradford; recomputed with colour-science, LittleCMS agrees to its 8-bit code."""
    codes = np.array([rgb]) / 255

    np.testing.assert_allclose(xyz_to_lab(SRGB.to_xyz(codes))[0], lab, atol=1e-3)


@pytest.mark.parametrize(
    ("rgb", "lab"), [((1, 0, 0), (53.2371, 80.0901, 67.2033)), ((0, 0, 1), (32.3009, 79.1953, -107.8555))]
)
def test_cielab_of_srgb_colours_relative_to_d65(rgb: tuple[int, ...], lab: tuple[float, ...]) -> None:
    """CIE 15 with D65 of the chromaticity (0.3127, 0.3290): a D65 Lab is not an ICC Lab."""
    np.testing.assert_allclose(xyz_to_lab(np.array(rgb) @ SRGB_TO_XYZ_D65.T, WHITE_D65), lab, atol=1e-3)


def test_cielab_agrees_with_scikit_image() -> None:
    """At 0.02, because scikit-image has a third set of sRGB constants and its white is not exactly neutral."""
    codes = np.random.default_rng(2).uniform(0, 1, (400, 3))

    ours = xyz_to_lab(srgb_to_linear(codes) @ SRGB_TO_XYZ_D65.T, WHITE_D65)

    np.testing.assert_allclose(ours, skimage.color.rgb2lab(codes[None])[0], atol=0.02)


@pytest.mark.parametrize(
    ("rgb", "oklab"),
    [
        ((1, 0, 0), (0.627955, 0.224863, 0.125846)),
        ((0, 1, 0), (0.866440, -0.233888, 0.179498)),
        ((0, 0, 1), (0.452014, -0.032457, -0.311528)),
        ((1, 1, 0), (0.967983, -0.071369, 0.198570)),
        ((1, 1, 1), (1.0, 0.0, 0.0)),
    ],
)
def test_oklab_of_srgb_colours(rgb: tuple[int, ...], oklab: tuple[float, ...]) -> None:
    """Ottosson (2020), by the matrices for linear sRGB."""
    np.testing.assert_allclose(linear_srgb_to_oklab(np.array(rgb, dtype=float)), oklab, atol=1e-5)


@pytest.mark.parametrize(
    ("xyz", "oklab"),
    [
        ((0.950, 1.0, 1.089), (1.0, 0.0, 0.0)),
        ((1, 0, 0), (0.450, 1.236, -0.019)),
        ((0, 1, 0), (0.922, -0.671, 0.263)),
        ((0, 0, 1), (0.153, -1.415, -0.449)),
    ],
)
def test_oklab_of_xyz(xyz: tuple[float, ...], oklab: tuple[float, ...]) -> None:
    """Ottosson (2020), table of XYZ (D65) and Oklab pairs, to three decimals; our route differs by 1e-3."""
    linear = np.array(xyz, dtype=float) @ np.linalg.inv(SRGB_TO_XYZ_D65).T

    np.testing.assert_allclose(linear_srgb_to_oklab(linear), oklab, atol=1.1e-3)


def test_neutrals_have_no_colour_in_oklab_and_cielab() -> None:
    grays = np.repeat(np.linspace(0, 1, 101)[:, None], 3, axis=1)

    oklab = linear_srgb_to_oklab(grays)

    np.testing.assert_allclose(oklab[:, 1:], 0, atol=1e-7)
    np.testing.assert_allclose(oklab_to_lab(oklab)[:, 1:], 0, atol=1e-4)


def test_colour_spaces_come_back() -> None:
    colours = np.random.default_rng(3).uniform([0, -0.4, -0.4], [1, 0.4, 0.4], (2000, 3))

    np.testing.assert_allclose(linear_srgb_to_oklab(oklab_to_linear_srgb(colours)), colours, atol=1e-9)
    np.testing.assert_allclose(lab_to_oklab(oklab_to_lab(colours)), colours, atol=1e-9)


SHARMA = np.array(
    [
        [50.0000, 2.6772, -79.7751, 50.0000, 0.0000, -82.7485, 2.0425],
        [50.0000, 3.1571, -77.2803, 50.0000, 0.0000, -82.7485, 2.8615],
        [50.0000, 2.8361, -74.0200, 50.0000, 0.0000, -82.7485, 3.4412],
        [50.0000, -1.3802, -84.2814, 50.0000, 0.0000, -82.7485, 1.0000],
        [50.0000, -1.1848, -84.8006, 50.0000, 0.0000, -82.7485, 1.0000],
        [50.0000, -0.9009, -85.5211, 50.0000, 0.0000, -82.7485, 1.0000],
        [50.0000, 0.0000, 0.0000, 50.0000, -1.0000, 2.0000, 2.3669],
        [50.0000, -1.0000, 2.0000, 50.0000, 0.0000, 0.0000, 2.3669],
        [50.0000, 2.4900, -0.0010, 50.0000, -2.4900, 0.0009, 7.1792],
        [50.0000, 2.4900, -0.0010, 50.0000, -2.4900, 0.0010, 7.1792],
        [50.0000, 2.4900, -0.0010, 50.0000, -2.4900, 0.0011, 7.2195],
        [50.0000, 2.4900, -0.0010, 50.0000, -2.4900, 0.0012, 7.2195],
        [50.0000, -0.0010, 2.4900, 50.0000, 0.0009, -2.4900, 4.8045],
        [50.0000, -0.0010, 2.4900, 50.0000, 0.0010, -2.4900, 4.8045],
        [50.0000, -0.0010, 2.4900, 50.0000, 0.0011, -2.4900, 4.7461],
        [50.0000, 2.5000, 0.0000, 50.0000, 0.0000, -2.5000, 4.3065],
        [50.0000, 2.5000, 0.0000, 73.0000, 25.0000, -18.0000, 27.1492],
        [50.0000, 2.5000, 0.0000, 61.0000, -5.0000, 29.0000, 22.8977],
        [50.0000, 2.5000, 0.0000, 56.0000, -27.0000, -3.0000, 31.9030],
        [50.0000, 2.5000, 0.0000, 58.0000, 24.0000, 15.0000, 19.4535],
        [50.0000, 2.5000, 0.0000, 50.0000, 3.1736, 0.5854, 1.0000],
        [50.0000, 2.5000, 0.0000, 50.0000, 3.2972, 0.0000, 1.0000],
        [50.0000, 2.5000, 0.0000, 50.0000, 1.8634, 0.5757, 1.0000],
        [50.0000, 2.5000, 0.0000, 50.0000, 3.2592, 0.3350, 1.0000],
        [60.2574, -34.0099, 36.2677, 60.4626, -34.1751, 39.4387, 1.2644],
        [63.0109, -31.0961, -5.8663, 62.8187, -29.7946, -4.0864, 1.2630],
        [61.2901, 3.7196, -5.3901, 61.4292, 2.2480, -4.9620, 1.8731],
        [35.0831, -44.1164, 3.7933, 35.0232, -40.0716, 1.5901, 1.8645],
        [22.7233, 20.0904, -46.6940, 23.0331, 14.9730, -42.5619, 2.0373],
        [36.4612, 47.8580, 18.3852, 36.2715, 50.5065, 21.2231, 1.4146],
        [90.8027, -2.0831, 1.4410, 91.1528, -1.6435, 0.0447, 1.4441],
        [90.9257, -0.5406, -0.9208, 88.6381, -0.8985, -0.7239, 1.5381],
        [6.7747, -0.2908, -2.4247, 5.8714, -0.0985, -2.2286, 0.6377],
        [2.0776, 0.0795, -1.1350, 0.9033, -0.0636, -0.5514, 0.9082],
    ]
)
"""Sharma, Wu & Dalal (2005), Color Research & Application 30(1), table 1."""

KNIFE_EDGE = 13
"""Pair 14: a hue difference of exactly 180°, where the order of operations decides between 4.8045 and 4.7461."""


def test_ciede2000_of_the_published_pairs() -> None:
    measured = delta_e_2000(SHARMA[:, :3], SHARMA[:, 3:6])
    back = delta_e_2000(SHARMA[:, 3:6], SHARMA[:, :3])
    ordinary = np.arange(len(SHARMA)) != KNIFE_EDGE

    np.testing.assert_allclose(measured[ordinary], SHARMA[ordinary, 6], atol=5e-5)
    np.testing.assert_allclose(back[ordinary], SHARMA[ordinary, 6], atol=5e-5)
    assert min(abs(measured[KNIFE_EDGE] - 4.8045), abs(measured[KNIFE_EDGE] - 4.7461)) < 5e-5


def test_cie76_of_the_first_published_pairs() -> None:
    """Euclidean distances, recomputed with colour-science: far from CIEDE2000 in blue."""
    expected = [4.0011, 6.3142, 9.1777, 2.0627, 2.3696, 2.9153]

    np.testing.assert_allclose(delta_e_76(SHARMA[:6, :3], SHARMA[:6, 3:6]), expected, atol=5e-5)


def test_ciede2000_agrees_with_colour_science_on_random_pairs() -> None:
    rng = np.random.default_rng(4)
    first = rng.uniform([0, -110, -110], [100, 110, 110], (5000, 3))
    second = first + rng.normal(0, 6, first.shape)

    np.testing.assert_allclose(delta_e_2000(first, second), colour.delta_E(first, second, method="CIE 2000"), atol=1e-9)


def test_a_reference_chart_is_rendered_as_computed() -> None:
    """The 24-patch chart as measured in 2005, D50: data set and 8-bit sRGB as colour-science gives them; ±1 code."""
    chart = colour.CCS_COLOURCHECKERS["ColorChecker 2005"]
    white = colour.xy_to_XYZ(chart.illuminant)
    expected = {"dark skin": (115, 81, 67), "foliage": (90, 108, 64), "orange": (224, 124, 47), "blue": (35, 63, 147)}

    for name, codes in expected.items():
        xyz = colour.xyY_to_XYZ(chart.data[name]) @ adaptation(white, WHITE_D50).T
        ours = np.clip(255 * SRGB.from_xyz(xyz[None])[0], 0, 255)
        np.testing.assert_allclose(ours, codes, atol=1.0)
