"""Process lists of others: published and worked examples, and OpenColorIO as the judge of every node and style."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from pathlib import Path

import numpy as np
import PyOpenColorIO
import pytest

from hueferry.errors import MapFileError
from hueferry.tables.process import read_process

FLOAT = 'inBitDepth="32f" outBitDepth="32f"'
GRADE = (
    "<SOPNode><Slope>1.2 1.0 0.8</Slope><Offset>-0.05 0.02 0.0</Offset><Power>0.9 1.0 1.2</Power></SOPNode>"
    "<SatNode><Saturation>1.3</Saturation></SatNode>"
)
HAND_MADE = (
    "0.00 0.00 0.00  0.05 0.02 0.90  0.10 0.80 0.06  0.07 0.85 0.95 "
    "0.90 0.04 0.03  0.92 0.09 0.88  0.96 0.91 0.11  1.00 1.00 1.00"
)


def listed(body: str, *, attributes: str = 'id="a" compCLFversion="3.0"') -> str:
    return f'<?xml version="1.0" encoding="UTF-8"?>\n<ProcessList {attributes}>\n{body}\n</ProcessList>\n'


def cube(interpolation: str) -> str:
    return f'<LUT3D {FLOAT} {interpolation}><Array dim="2 2 2 3">{HAND_MADE}</Array></LUT3D>'


def colours() -> np.ndarray:
    """200,000 colours, also beyond 0 … 1, and grays and corners."""
    rng = np.random.default_rng(5)
    grays = np.repeat(np.linspace(-0.1, 1.1, 2401)[:, None], 3, axis=1)
    corners = np.array(list(itertools.product([0.0, 0.5, 1.0], repeat=3)))
    return np.concatenate([grays, corners, rng.uniform(-0.1, 1.1, (200_000, 3))]).astype(np.float32)


def opencolorio(path: Path) -> Callable[[np.ndarray], np.ndarray]:
    """OpenColorIO's own answer, unoptimised: its default replaces powers by quicker, coarser ones."""
    processor = PyOpenColorIO.Config.CreateRaw().getProcessor(PyOpenColorIO.FileTransform(src=str(path)))
    exact = processor.getOptimizedCPUProcessor(
        PyOpenColorIO.BIT_DEPTH_F32, PyOpenColorIO.BIT_DEPTH_F32, PyOpenColorIO.OPTIMIZATION_NONE
    )

    def run(codes: np.ndarray) -> np.ndarray:
        values = np.array(codes, dtype=np.float32, order="C")
        exact.applyRGB(values)
        return values

    return run


def results(tmp_path: Path, body: str, inputs: list[list[float]]) -> np.ndarray:
    path = tmp_path / "list.clf"
    path.write_text(listed(body), encoding="utf-8")
    return read_process(path)(np.array(inputs, dtype=float))


_HALVES = np.arange(1 << 16, dtype=np.uint16).view(np.float16)
_FINITE = np.where(np.isfinite(_HALVES), _HALVES, np.float16(0)).astype(float)
_ROOTS = (np.sign(_FINITE) * np.sqrt(np.abs(_FINITE))).astype(np.float16)
_CAMERA = 'base="10" logSideSlope="0.256663" logSideOffset="0.584555" linSideSlope="0.9892" linSideOffset="0.0108"'
_LATTICE = "\n".join(f"{x:.9g}" for x in np.random.default_rng(6).uniform(-0.1, 1.1, 5**3 * 3))


def exponent(style: str, parameters: str) -> str:
    return f'<Exponent {FLOAT} style="{style}"><ExponentParams {parameters}/></Exponent>'


def logarithm(style: str, parameters: str) -> str:
    return f'<Log {FLOAT} style="{style}">{parameters}</Log>'


BASIC = ["basicFwd", "basicRev", "basicMirrorFwd", "basicMirrorRev", "basicPassThruFwd", "basicPassThruRev"]
JOINED = ["monCurveFwd", "monCurveRev", "monCurveMirrorFwd", "monCurveMirrorRev"]
NODES = {
    **{style: exponent(style, 'exponent="2.2"') for style in BASIC},
    **{style: exponent(style, 'exponent="2.4" offset="0.055"') for style in JOINED},
    **{f"{style} of lightness": exponent(style, 'exponent="3" offset="0.16"') for style in JOINED},
    **{f"{style} of nothing": exponent(style, 'exponent="1" offset="0"') for style in JOINED},
    "a power for one channel": exponent("basicFwd", 'exponent="1.8" channel="G"'),
    **{style: logarithm(style, "") for style in ("log10", "log2", "antiLog10", "antiLog2")},
    **{style: logarithm(style, f"<LogParams {_CAMERA}/>") for style in ("linToLog", "logToLin")},
    **{
        f"{style} {slope}": logarithm(style, f'<LogParams {_CAMERA} linSideBreak="0.0078" {slope}/>')
        for style in ("cameraLinToLog", "cameraLogToLin")
        for slope in ("", 'linearSlope="6.025"')
    },
    **{style: f'<ASC_CDL {FLOAT} style="{style}">{GRADE}</ASC_CDL>' for style in ("Fwd", "Rev", "FwdNoClamp")},
    "RevNoClamp": f'<ASC_CDL {FLOAT} style="RevNoClamp">{GRADE}</ASC_CDL>',
    "decision list on integers": f'<ASC_CDL inBitDepth="10i" outBitDepth="12i">{GRADE}</ASC_CDL>',
    "matrix 10i to 12i": '<Matrix inBitDepth="10i" outBitDepth="12i"><Array dim="3 4 3">'
    "4 .1 -.3 100 -.05 4 .05 -9 0 -.2 4.2 20</Array></Matrix>",
    "range": '<Range inBitDepth="10i" outBitDepth="12i"><minInValue>64</minInValue><maxInValue>940</maxInValue>'
    "<minOutValue>0</minOutValue><maxOutValue>4095</maxOutValue></Range>",
    "range without clamps": f'<Range {FLOAT} style="noClamp"><minInValue>0.1</minInValue><maxInValue>0.9</maxInValue>'
    "<minOutValue>0</minOutValue><maxOutValue>2</maxOutValue></Range>",
    "a lower end": '<Range inBitDepth="10i" outBitDepth="12i"><minInValue>102.3</minInValue>'
    "<minOutValue>409.5</minOutValue></Range>",
    "an upper end": f"<Range {FLOAT}><maxInValue>0.9</maxInValue><maxOutValue>0.9</maxOutValue></Range>",
    "a curve": '<LUT1D inBitDepth="8i" outBitDepth="12i"><Array dim="4 1">0 3000 1000 4095</Array></LUT1D>',
    "three curves": f'<LUT1D {FLOAT}><Array dim="3 3">0 1 0 .25 .5 .5 1 0 1</Array></LUT1D>',
    "raw halfs": '<LUT1D inBitDepth="16f" outBitDepth="12i" rawHalfs="true">'
    '<Array dim="3 1">0 29000 27647</Array></LUT1D>',
    "half domain": f'<LUT1D inBitDepth="16f" outBitDepth="16f" halfDomain="true"><Array dim="65536 1">'
    f"{chr(10).join(f'{x:.8g}' for x in _ROOTS.tolist())}</Array></LUT1D>",
    "half domain in raw halfs": f'<LUT1D inBitDepth="16f" outBitDepth="16f" halfDomain="true" rawHalfs="true">'
    f'<Array dim="65536 1">{chr(10).join(str(x) for x in _ROOTS.view(np.uint16).tolist())}</Array></LUT1D>',
    "trilinear": f'<LUT3D {FLOAT} interpolation="trilinear"><Array dim="5 5 5 3">{_LATTICE}</Array></LUT3D>',
    "tetrahedral": f'<LUT3D {FLOAT} interpolation="tetrahedral"><Array dim="5 5 5 3">{_LATTICE}</Array></LUT3D>',
    "unnamed interpolation": f'<LUT3D {FLOAT}><Array dim="5 5 5 3">{_LATTICE}</Array></LUT3D>',
    "several": exponent("monCurveFwd", 'exponent="2.4" offset="0.055"')
    + f'<Matrix {FLOAT}><Array dim="3 3">.8 .1 .1 .05 .9 .05 0 .2 .8</Array></Matrix>'
    + exponent("monCurveRev", 'exponent="2.4" offset="0.055"')
    + f'<LUT3D {FLOAT}><Array dim="5 5 5 3">{_LATTICE}</Array></LUT3D>',
}


@pytest.mark.parametrize("name", NODES)
def test_opencolorio_gets_the_same_colours(name: str, tmp_path: Path) -> None:
    """200,000 colours, within 1e-5; of large values relative to them, as they are 32-bit there."""
    path = tmp_path / "list.clf"
    path.write_text(listed(NODES[name]), encoding="utf-8")

    ours = read_process(path)(colours().astype(float))

    assert (np.abs(ours - opencolorio(path)(colours())) <= 1e-5 * np.maximum(1.0, np.abs(ours))).all()


TETRAHEDRAL = {
    (0.25, 0.50, 0.75): (0.2800, 0.4675, 0.7125),
    (0.75, 0.50, 0.25): (0.7150, 0.4875, 0.2850),
    (0.50, 0.25, 0.75): (0.4925, 0.2775, 0.6950),
    (0.20, 0.60, 0.40): (0.2340, 0.5300, 0.4020),
    (0.60, 0.20, 0.40): (0.5640, 0.2260, 0.3820),
    (0.40, 0.60, 0.20): (0.4120, 0.5420, 0.2340),
    (0.50, 0.50, 0.50): (0.5, 0.5, 0.5),
    (1, 0, 0): (0.90, 0.04, 0.03),
    (0, 1, 0): (0.10, 0.80, 0.06),
    (0, 0, 1): (0.05, 0.02, 0.90),
    (0.60, 0.30, 0.60): (0.576, 0.327, 0.564),
    (0.30, 0.30, 0.60): (0.315, 0.306, 0.570),
    (-0.2, 0.5, 1.3): (0.060, 0.435, 0.925),
}
TRILINEAR = {
    (0.25, 0.50, 0.75): (0.2812500, 0.4515625, 0.7065625),
    (0.75, 0.50, 0.25): (0.7162500, 0.4715625, 0.2790625),
    (0.50, 0.25, 0.75): (0.4906250, 0.2615625, 0.6915625),
    (0.20, 0.60, 0.40): (0.2384, 0.51448, 0.4004),
    (0.60, 0.20, 0.40): (0.5664, 0.21048, 0.3820),
    (0.40, 0.60, 0.20): (0.4132, 0.52328, 0.2300),
    (0.50, 0.50, 0.50): (0.5, 0.46375, 0.49125),
    (1, 0, 0): (0.90, 0.04, 0.03),
    (0.60, 0.30, 0.60): (0.5784, 0.30588, 0.5652),
    (0.30, 0.30, 0.60): (0.3120, 0.28164, 0.5607),
    (-0.2, 0.5, 1.3): (0.060, 0.435, 0.925),
}


@pytest.mark.parametrize(
    ("attribute", "worked"),
    [('interpolation="tetrahedral"', TETRAHEDRAL), ('interpolation="trilinear"', TRILINEAR), ("", TRILINEAR)],
)
def test_a_table_made_by_hand(attribute: str, worked: dict, tmp_path: Path) -> None:
    """By hand from the definitions of Academy S-2014-006, appendix A, ties too; trilinear is the default there."""
    found = results(tmp_path, cube(attribute), [list(point) for point in worked])

    np.testing.assert_allclose(found, list(worked.values()), atol=1e-12)


def test_the_third_channel_of_a_table_changes_fastest(tmp_path: Path) -> None:
    """An identity whose rows are in the order of the standard keeps its colours; in the other, red and blue swap."""
    nodes = list(itertools.product([0, 1], repeat=3))
    ordered = " ".join(str(x) for node in nodes for x in node)
    swapped = " ".join(str(x) for node in nodes for x in node[::-1])
    for rows, wanted in ((ordered, [0.2, 0.5, 0.9]), (swapped, [0.9, 0.5, 0.2])):
        body = f'<LUT3D {FLOAT}><Array dim="2 2 2 3">{rows}</Array></LUT3D>'
        np.testing.assert_allclose(results(tmp_path, body, [[0.2, 0.5, 0.9]]), [wanted], atol=1e-15)


def test_a_curve_is_scaled_by_its_output_depth_alone(tmp_path: Path) -> None:
    """Academy S-2014-006, LUT1D: by hand 0, 1000/4095 and 1 at codes 0, 1/2 and 1."""
    body = '<LUT1D inBitDepth="8i" outBitDepth="12i"><Array dim="3 1">0 1000 4095</Array></LUT1D>'
    found = results(tmp_path, body, [[0.25, 0.5, 0.75], [-0.1, 1.2, 0.0]])

    np.testing.assert_allclose(found[0], [500 / 4095, 1000 / 4095, (1000 + 3095 / 2) / 4095], rtol=1e-12)
    np.testing.assert_allclose(found[1], [0, 1, 0])


def test_the_columns_of_a_curve_are_red_green_and_blue(tmp_path: Path) -> None:
    body = f'<LUT1D {FLOAT}><Array dim="3 3">0 1 0 .25 .5 .5 1 0 1</Array></LUT1D>'
    found = results(tmp_path, body, [[0.25] * 3, [0.75] * 3])

    np.testing.assert_allclose(found, [[0.125, 0.75, 0.25], [0.625, 0.25, 0.75]])


def test_a_matrix_carries_the_scales_of_both_depths(tmp_path: Path) -> None:
    """The same colours from a matrix on floats, and on 10 and 12 bits with coefficients × 4095/1023, offsets × 4095."""
    rows = np.array([[1.2, 0.1, -0.3, 0.05], [-0.05, 1, 0.05, -0.01], [0, -0.2, 1.2, 0.02]])
    scaled = rows * [*[4095 / 1023] * 3, 4095]
    for depths, numbers in ((FLOAT, rows), ('inBitDepth="10i" outBitDepth="12i"', scaled)):
        text = " ".join(f"{x:.17g}" for x in numbers.ravel())
        found = results(tmp_path, f'<Matrix {depths}><Array dim="3 4">{text}</Array></Matrix>', [[0.3, 0.5, 0.7]])
        np.testing.assert_allclose(found, [[0.25, 0.51, 0.76]], atol=1e-12)


def test_the_matrix_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 4 (10i to 10i): offsets are in codes of 1023."""
    body = (
        '<Matrix inBitDepth="10i" outBitDepth="10i"><Array dim="3 4">1.2 0.0 0.0 0.002 '
        "0.0 1.03 0.001 -0.005 0.004 -0.007 1.004 0.0</Array></Matrix>"
    )
    found = results(tmp_path, body, [[0.5] * 3])

    np.testing.assert_allclose(found, [[0.6 + 0.002 / 1023, 0.5155 - 0.005 / 1023, 0.5005]], atol=1e-12)


def test_the_range_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 5: 10-bit full range to 64 … 940."""
    body = (
        '<Range inBitDepth="10i" outBitDepth="10i"><minInValue>0</minInValue><maxInValue>1023</maxInValue>'
        "<minOutValue>64</minOutValue><maxOutValue>940</maxOutValue></Range>"
    )
    found = results(tmp_path, body, [[0, 0.5, 1], [-1, 2, 0.25]])

    np.testing.assert_allclose(found[0], [64 / 1023, 502 / 1023, 940 / 1023])
    np.testing.assert_allclose(found[1], [64 / 1023, 940 / 1023, (64 + 219) / 1023])


def test_the_srgb_curve_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 9; IEC 61966-2-1 prints rounded numbers, 5e-6 from this smooth curve."""
    codes = np.linspace(0, 1, 1001)
    light = np.where(codes <= 0.04045, codes / 12.92, ((codes + 0.055) / 1.055) ** 2.4)
    found = results(
        tmp_path, exponent("monCurveFwd", 'exponent="2.4" offset="0.055"'), np.stack([codes] * 3, 1).tolist()
    )

    np.testing.assert_allclose(found[:, 0], light, atol=5e-6)


def test_the_lightness_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 10: CIE L* / 100 of relative luminance, CIE 15:2018."""
    luminance = np.linspace(0, 1, 1001)
    lightness = np.where(luminance > 216 / 24389, 1.16 * np.cbrt(luminance) - 0.16, luminance * 24389 / 2700)
    inputs = np.stack([luminance] * 3, 1).tolist()
    found = results(tmp_path, exponent("monCurveRev", 'exponent="3.0" offset="0.16"'), inputs)

    np.testing.assert_allclose(found[:, 1], lightness, atol=1e-9)


def test_the_colour_space_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 15: XYZ relative to D65 to CIELAB / 100, by the formulas of CIE 15:2018.

    The red of IEC 61966-2-1 has L* a* b* 53.24, 80.09, 67.20 there; the file rounds its white point.
    """
    body = (
        f'<Matrix {FLOAT}><Array dim="3 3">1.052126639 0 0 0 1 0 0 0 0.918224951</Array></Matrix>'
        + exponent("monCurveRev", 'exponent="3.0" offset="0.16"')
        + f'<Matrix {FLOAT}><Array dim="3 3">0 1 0 4.31034483 -4.31034483 0 0 1.72413793 -1.72413793</Array></Matrix>'
    )
    xyz = np.random.default_rng(3).uniform(0, 1, (1000, 3))
    f = np.where(xyz * XYZ_SCALE > 216 / 24389, np.cbrt(xyz * XYZ_SCALE), (24389 / 27 * xyz * XYZ_SCALE + 16) / 116)
    lab = np.stack([116 * f[:, 1] - 16, 500 * (f[:, 0] - f[:, 1]), 200 * (f[:, 1] - f[:, 2])], axis=1)

    np.testing.assert_allclose(100 * results(tmp_path, body, xyz.tolist()), lab, atol=1e-5)
    red = 100 * results(tmp_path, body, [[0.4123908, 0.2126390, 0.0193308]])
    np.testing.assert_allclose(red, [[53.24, 80.09, 67.20]], atol=0.01)


XYZ_SCALE = np.array([1.052126639, 1.0, 0.918224951])


def test_the_logarithm_with_a_straight_part_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 14; the straight part and middle gray as Academy S-2016-001 prints them."""
    parameters = (
        '<LogParams base="2" logSideSlope="0.05707762557" logSideOffset="0.5547945205" linSideBreak="0.0078125"/>'
    )
    found = results(tmp_path, logarithm("cameraLinToLog", parameters), [[-0.01, 0, 0.005], [0.0078125, 0.18, 1]])

    straight = 10.5402377416545 * np.array([-0.01, 0, 0.005, 0.0078125]) + 0.0729055341958355
    np.testing.assert_allclose(found.ravel()[:4], straight, atol=1e-8)
    np.testing.assert_allclose(found[1, 1:], [(np.log2(0.18) + 9.72) / 17.52, 9.72 / 17.52], atol=1e-9)


WORKED_GRADES = {
    "Fwd": [
        ((0.4, 0.5, 0.6), (0.457836926, 0.525610953, 0.388417466)),
        ((0.25, 0.5, 0.75), (0.231705936, 0.534378970, 0.562625723)),
        ((1, 0, 0.02), (1, 0, 0)),
        ((0.02, 0.01, 0.9), (0, 0.017959683, 0.855440364)),
        ((1, 1, 1), (1, 1, 0.699694924)),
    ],
    "FwdNoClamp": [
        ((1, 0, 0.02), (1.397479139, -0.050771785, -0.067675012)),
        ((0.02, 0.01, 0.9), (-0.053182037, 0.019617963, 0.857098644)),
        ((1, 1, 1), (1.166499029, 1.018248105, 0.686854705)),
    ],
}


@pytest.mark.parametrize("style", WORKED_GRADES)
def test_a_decision_list_worked_through(style: str, tmp_path: Path) -> None:
    """Slope, offset, clamp, power, saturation, clamp: ASC CDL 1.2 (Pines & Reisner 2009), worked step by step."""
    inputs, outputs = zip(*WORKED_GRADES[style], strict=True)
    found = results(tmp_path, f'<ASC_CDL {FLOAT} style="{style}">{GRADE}</ASC_CDL>', [list(row) for row in inputs])

    np.testing.assert_allclose(found, outputs, atol=1e-9)


def test_the_decision_list_of_the_standard(tmp_path: Path) -> None:
    """Academy S-2014-006, example 12: slope 1 1 .9, offset −.03 −.02 0, power 1.25 1 1, saturation 1.7."""
    body = (
        '<ASC_CDL id="cc01234" inBitDepth="16f" outBitDepth="16f" style="Fwd"><SOPNode><Slope>1 1 0.9</Slope>'
        "<Offset>-0.03 -0.02 0</Offset><Power>1.25 1 1</Power></SOPNode><SatNode><Saturation>1.7</Saturation></SatNode>"
        "</ASC_CDL>"
    )
    found = results(tmp_path, body, [[0.4, 0.5, 0.6], [0.25, 0.5, 0.75], [0.18] * 3, [1, 1, 1]])

    wanted = [
        [0.180026218, 0.505456116, 0.607456116],
        [0, 0.519155510, 0.850655510],
        [0.056512690, 0.169817781, 0.173217781],
        [0.957117343, 0.986626463, 0.850626463],
    ]
    np.testing.assert_allclose(found, wanted, atol=1e-9)


@pytest.mark.parametrize("style", ["basicMirror", "monCurve", "monCurveMirror"])
def test_a_power_undoes_its_reverse(style: str, tmp_path: Path) -> None:
    parameters = 'exponent="2.4" offset="0.055"' if "mon" in style else 'exponent="2.4"'
    inputs = np.linspace(-0.5, 1.5, 300).reshape(-1, 3)
    body = exponent(f"{style}Fwd", parameters) + exponent(f"{style}Rev", parameters)

    np.testing.assert_allclose(results(tmp_path, body, inputs.tolist()), inputs, atol=1e-12)


def test_namespaces_old_versions_and_foreign_line_ends_are_read(tmp_path: Path) -> None:
    matrix = f'<Matrix {FLOAT}><Array dim="3 3 3">.5 0 0\r\n0 .5 0\r\n0 0 .5</Array></Matrix>'
    for attributes in (
        'id="a" compCLFversion="2.0"',
        'xmlns="urn:AMPAS:CLF:v3.0" id="a" compCLFversion="3.0"',
        'xmlns="http://www.smpte-ra.org/ns/2136-1/2024" compCLFversion="3"',
    ):
        path = tmp_path / "list.clf"
        path.write_bytes(listed(matrix, attributes=attributes).encode())
        np.testing.assert_allclose(read_process(path)(np.ones((1, 3))), [[0.5] * 3])


REFUSED = {
    "nodes": ("", "0$|has 0"),
    "not define": (f'<Blur {FLOAT} radius="3"/>', "holds 'Blur'.*does not define"),
    "agree": (
        '<Matrix inBitDepth="8i" outBitDepth="10i"><Array dim="3 3">1 0 0 0 1 0 0 0 1</Array></Matrix>'
        '<Matrix inBitDepth="8i" outBitDepth="8i"><Array dim="3 3">1 0 0 0 1 0 0 0 1</Array></Matrix>',
        "reads 8i, but the node before writes 10i",
    ),
    "depth": ('<Matrix inBitDepth="9i" outBitDepth="8i"><Array dim="3 3">1 0 0 0 1 0 0 0 1</Array></Matrix>', "'9i'"),
    "count": (f'<Matrix {FLOAT}><Array dim="3 3">1 0 0 0 1 0 0 0</Array></Matrix>', "promises 3 3 .* holds 8"),
    "shape": (f'<Matrix {FLOAT}><Array dim="4 4">1</Array></Matrix>', "must be 3 3 or 3 4"),
    "array": (f"<Matrix {FLOAT}/>", "no array"),
    "twice": (f'<LUT1D {FLOAT}><Array dim="2 1">0 1</Array><Array dim="2 1">0 1</Array></LUT1D>', "Array twice"),
    "cubic": (f'<LUT3D {FLOAT}><Array dim="2 2 3 3">1</Array></LUT3D>', "n n n 3"),
    "huge": (f'<LUT3D {FLOAT}><Array dim="130 130 130 3">1</Array></LUT3D>', "between 2 and 129"),
    "interpolation": (f'<LUT3D {FLOAT} interpolation="cubic"><Array dim="2 2 2 3">1</Array></LUT3D>', "'cubic'"),
    "cubic curve": (f'<LUT1D {FLOAT} interpolation="cubic"><Array dim="2 1">0 1</Array></LUT1D>', "read linearly"),
    "index map": (f'<LUT1D {FLOAT}><IndexMap dim="2">0 1</IndexMap><Array dim="2 1">0 1</Array></LUT1D>', "IndexMap"),
    "attribute": (f'<LUT1D {FLOAT} hueAdjust="x"><Array dim="2 1">0 1</Array></LUT1D>', "attribute 'hueAdjust'"),
    "nan": (f'<LUT1D {FLOAT}><Array dim="2 1">nan 1</Array></LUT1D>', "not finite"),
    "words": (f'<LUT1D {FLOAT}><Array dim="2 1">white 1</Array></LUT1D>', "no number"),
    "half rows": (f'<LUT1D {FLOAT} halfDomain="true"><Array dim="2 1">0 1</Array></LUT1D>', "half domain"),
    "raw halfs": (f'<LUT1D {FLOAT} rawHalfs="true"><Array dim="2 1">0.5 1</Array></LUT1D>', "bit patterns"),
    "no range": (f"<Range {FLOAT}/>", "neither minimum nor maximum"),
    "half a pair": (f"<Range {FLOAT}><minInValue>0</minInValue></Range>", "one minInValue and one minOutValue"),
    "unequal pair": (f"<Range {FLOAT}><maxInValue>1</maxInValue><maxOutValue>2</maxOutValue></Range>", "differ"),
    "one unclamped": (
        f'<Range {FLOAT} style="noClamp"><maxInValue>1</maxInValue><maxOutValue>1</maxOutValue></Range>',
        "does not clamp",
    ),
    "exponent style": (exponent("sideways", 'exponent="2"'), "'sideways'; it must be one of basicFwd"),
    "exponent": (exponent("basicFwd", 'exponent="0"'), "allowed"),
    "no exponent": (exponent("basicFwd", ""), "lacks the attribute exponent"),
    "offset": (exponent("basicFwd", 'exponent="2" offset="0.1"'), "only monCurve"),
    "channels": (exponent("basicFwd", 'exponent="2" channel="X"'), "one for each of R, G and B"),
    "logarithm": (logarithm("linToLog", '<LogParams base="1"/>'), "leaves no logarithm"),
    "break": (logarithm("cameraLinToLog", "<LogParams/>"), "lacks the attribute linSideBreak"),
    "pure logarithm": (logarithm("log10", '<LogParams base="3"/>'), "have none"),
    "one channel of a logarithm": (logarithm("linToLog", '<LogParams channel="R"/>'), "every channel"),
    "power": (f"<ASC_CDL {FLOAT}>{GRADE.replace('0.9', '-1')}</ASC_CDL>", "power is more than 0"),
    "backwards": (f'<ASC_CDL {FLOAT} style="Rev">{GRADE.replace("1.3", "0")}</ASC_CDL>', "run backwards"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_the_standard_does_not_define_is_refused_in_words(name: str, tmp_path: Path) -> None:
    body, complaint = REFUSED[name]
    path = tmp_path / "list.clf"
    path.write_text(listed(body), encoding="utf-8")

    with pytest.raises(MapFileError, match=complaint):
        read_process(path)


@pytest.mark.parametrize(
    ("attributes", "complaint"),
    [
        ('id="a"', "does not say its CLF version"),
        ('id="a" compCLFversion="4.0"', "4.0"),
        ('compCLFversion="3"', "no id"),
    ],
)
def test_a_list_must_say_what_it_is(attributes: str, complaint: str, tmp_path: Path) -> None:
    path = tmp_path / "list.clf"
    path.write_text(listed(NODES["range"], attributes=attributes), encoding="utf-8")

    with pytest.raises(MapFileError, match=complaint):
        read_process(path)


def test_nesting_without_end_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "deep.clf"
    path.write_text(listed("<Info>" + "<a>" * 2000 + "</a>" * 2000 + "</Info>" + NODES["range"]), encoding="utf-8")

    with pytest.raises(MapFileError, match="nested"):
        read_process(path)


def test_results_are_finite_whatever_comes_in(tmp_path: Path) -> None:
    path = tmp_path / "list.clf"
    path.write_text(listed(NODES["antiLog10"] * 3 + NODES["log2"] + NODES["basicMirrorRev"]), encoding="utf-8")
    strange = np.array([[np.nan, np.inf, -np.inf], [1e30, -1e30, 0.0], [3e38, 2.0, 1e-40]])

    assert np.isfinite(read_process(path)(strange)).all()
