"""Process lists as tables: exact where a table can hold them, honest where it cannot, refused where it fails."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import PyOpenColorIO
import pytest

from hueferry.applying.engine import Engine
from hueferry.errors import MapFileError
from hueferry.tables.clf import clf_text, read_clf
from hueferry.tables.lookup import look_up
from hueferry.tables.saved_map import SavedMap, read_map
from tables.test_process import FLOAT, GRADE, HAND_MADE, exponent, listed, logarithm, opencolorio

TO_LIGHT = exponent("monCurveFwd", 'exponent="2.4" offset="0.055"')
TO_CODES = exponent("monCurveRev", 'exponent="2.4" offset="0.055"')
MATRIX = f'<Matrix {FLOAT}><Array dim="3 3">.8 .1 .1 .05 .9 .05 0 .2 .8</Array></Matrix>'
NARROW = (
    f"<Range {FLOAT}><minInValue>0.1</minInValue><maxInValue>0.9</maxInValue>"
    "<minOutValue>0</minOutValue><maxOutValue>1</maxOutValue></Range>"
)
SMOOTH = np.stack(np.meshgrid(*[np.linspace(0, 1, 17)] * 3, indexing="ij"), axis=-1) ** [0.9, 1.1, 1.0]
BENT = np.clip(SMOOTH + np.random.default_rng(1).normal(0, 0.02, SMOOTH.shape), 0, 1)
ROWS = "\n".join(f"{x:.9g}" for x in BENT.ravel())


def cube(interpolation: str) -> str:
    return f'<LUT3D {FLOAT} interpolation="{interpolation}"><Array dim="17 17 17 3">{ROWS}</Array></LUT3D>'


def zigzag(columns: int) -> str:
    numbers = ["0 .6 .3 .8 .2", "0 1 .2 .6 .8 .6 .3 .3 .9 .8 .1 .1 .2 0 0"][columns == 3]
    return f'<LUT1D {FLOAT}><Array dim="5 {columns}">{numbers}</Array></LUT1D>'


EXACT = {
    "encoding curve": TO_CODES,
    "decoding curve": TO_LIGHT,
    "affine": MATRIX + MATRIX,
    "negative": f'<LUT1D {FLOAT}><Array dim="4 1">1 .6 .3 0</Array></LUT1D>',
    "turning back and forth": zigzag(1),
    "each channel in its own way": zigzag(3),
    "a clamp": NARROW,
    "one colour": f'<LUT1D {FLOAT}><Array dim="2 1">.3 .3</Array></LUT1D>',
    "tetrahedra": cube("tetrahedral"),
    "curves, then tetrahedra": TO_CODES + cube("tetrahedral"),
}


def saved(tmp_path: Path, body: str) -> tuple[SavedMap, Path]:
    path = tmp_path / "list.clf"
    path.write_text(listed(body), encoding="utf-8")
    return read_map(path), path


def somewhere() -> np.ndarray:
    """Colours of 0 … 1 that no table was fitted to."""
    rng = np.random.default_rng(77)
    return np.concatenate([rng.uniform(0, 1, (50_000, 3)), rng.uniform(0, 1, (10_000, 3)) ** 4]).astype(np.float32)


@pytest.mark.parametrize("name", EXACT)
def test_what_a_table_can_hold_is_exact(name: str, tmp_path: Path) -> None:
    """Within 1e-5 of OpenColorIO's own run of the list."""
    found, path = saved(tmp_path, EXACT[name])

    ours = look_up(found.table, somewhere().astype(float))

    np.testing.assert_allclose(ours, opencolorio(path)(somewhere()), atol=1e-5)
    assert found.misfit is not None
    assert found.misfit.largest < 255e-5


@pytest.mark.parametrize("name", ["encoding curve", "affine", "negative", "turning back and forth"])
def test_lists_of_one_dimension_and_affine_ones_need_few_nodes(name: str, tmp_path: Path) -> None:
    """One step of the lattice for every piece that rises or falls; all else is in the curves."""
    assert saved(tmp_path, EXACT[name])[0].table.size == (5 if name.startswith("turning") else 2)


NEAR = {
    "trilinear": cube("trilinear"),
    "a matrix in light": TO_LIGHT + MATRIX + TO_CODES,
    "a decision list": f"<ASC_CDL {FLOAT}>{GRADE}</ASC_CDL>",
    "a clamp, then tetrahedra": NARROW.replace("0.1<", "0.07<") + cube("tetrahedral"),
    "a negative, then tetrahedra": EXACT["negative"] + cube("tetrahedral"),
}


@pytest.mark.parametrize("name", NEAR)
def test_what_is_stated_is_what_is_found(name: str, tmp_path: Path) -> None:
    """The misfit on other colours than it was found with, against OpenColorIO."""
    found, path = saved(tmp_path, NEAR[name])
    error = 255 * np.abs(look_up(found.table, somewhere().astype(float)) - opencolorio(path)(somewhere())).max(axis=1)

    assert found.misfit is not None
    assert found.misfit.high <= 1.5
    assert np.quantile(error, 0.999) <= 1.25 * found.misfit.high + 0.003
    assert error.max() <= 2 * found.misfit.largest + 0.003


def test_a_list_that_no_table_holds_is_refused(tmp_path: Path) -> None:
    with pytest.raises(MapFileError, match=r"cannot be applied as a table.*codes of 255 off"):
        saved(tmp_path, logarithm("log2", "") + MATRIX)


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16])
def test_whole_codes_of_a_curve_come_out_as_opencolorio_has_them(dtype: type, tmp_path: Path) -> None:
    """The encoding curve of IEC 61966-2-1 on every code of 8 bit and of 16 bit: the very same codes."""
    found, path = saved(tmp_path, TO_CODES)
    top = np.iinfo(dtype).max
    codes = np.repeat(np.arange(top + 1, dtype=dtype)[:, None], 3, axis=1)[None]

    ours = Engine(found.table, dtype, 8 if top == 255 else 16).apply(codes)

    theirs = opencolorio(path)((codes[0] / np.float32(top)).astype(np.float32)) * top
    assert np.abs(ours[0] - theirs).max() <= 0.5 + 1e-5 * top


def test_a_table_of_somebody_elses_list_can_be_saved_as_ours(tmp_path: Path) -> None:
    found, _ = saved(tmp_path, zigzag(3))
    (tmp_path / "ours.clf").write_text(clf_text(found.table, encoding="sRGB"), encoding="utf-8")

    again = read_clf(tmp_path / "ours.clf")

    np.testing.assert_array_equal(again.lattice, found.table.lattice)
    np.testing.assert_array_equal(again.curves, found.table.curves)


def test_the_axes_of_a_lopsided_table_stay_apart(tmp_path: Path) -> None:
    """Red, green and blue of the hand-made table end where its rows say, through the engine as well."""
    body = f'<LUT3D {FLOAT} interpolation="tetrahedral"><Array dim="2 2 2 3">{HAND_MADE}</Array></LUT3D>'
    found, _ = saved(tmp_path, body)
    corners = np.eye(3, dtype=np.float32)[None]

    result = Engine(found.table, np.float32, 32).apply(corners)[0]

    np.testing.assert_allclose(result, [[0.9, 0.04, 0.03], [0.1, 0.8, 0.06], [0.05, 0.02, 0.9]], atol=1e-6)


CORRECTION = """<ColorCorrection id="{name}">
  <Description>evening light</Description>
  <SOPNode><Slope>1.2 1.0 0.8</Slope><Offset>-0.05 0.02 0.0</Offset><Power>0.9 1.0 {power}</Power></SOPNode>
  <SATNode><Saturation>1.3</Saturation></SATNode>
</ColorCorrection>
"""


def collection(*names: str) -> str:
    inside = "".join(CORRECTION.format(name=name, power=1 + 0.2 * i) for i, name in enumerate(names, start=1))
    inside = inside.replace("1.3", "1.0")  # channel by channel, so that tables are found quickly
    return f'<ColorCorrectionCollection xmlns="urn:ASC:CDL:v1.01">{inside}</ColorCorrectionCollection>'


def test_decision_lists_are_read_with_clamps(tmp_path: Path) -> None:
    """As OpenColorIO runs the same file in the style of ASC CDL 1.2."""
    path = tmp_path / "grade.cc"
    path.write_text(CORRECTION.format(name="one", power=1.2), encoding="utf-8")
    transform = PyOpenColorIO.CDLTransform.CreateFromFile(str(path), "one")
    transform.setStyle(PyOpenColorIO.CDL_ASC)
    processor = PyOpenColorIO.Config.CreateRaw().getProcessor(transform)
    exact = processor.getOptimizedCPUProcessor(
        PyOpenColorIO.BIT_DEPTH_F32, PyOpenColorIO.BIT_DEPTH_F32, PyOpenColorIO.OPTIMIZATION_NONE
    )
    theirs = somewhere()
    exact.applyRGB(theirs)

    found = read_map(path)

    error = 255 * np.abs(look_up(found.table, somewhere().astype(float)) - theirs).max(axis=1)
    assert found.misfit is not None
    assert np.quantile(error, 0.999) <= 1.25 * found.misfit.high


def test_one_of_several_corrections_is_chosen_by_name(tmp_path: Path) -> None:
    path = tmp_path / "grades.ccc"
    path.write_text(collection("morning", "evening"), encoding="utf-8")
    (tmp_path / "evening.cc").write_text(CORRECTION.format(name="x", power=1.4).replace("1.3", "1.0"), encoding="utf-8")

    with pytest.raises(MapFileError, match=r"2 corrections; choose one by its id: 'morning', 'evening'"):
        read_map(path)
    with pytest.raises(MapFileError, match="no correction called 'noon'"):
        read_map(path, correction="noon")
    chosen = read_map(path, correction="evening").table

    np.testing.assert_array_equal(chosen.lattice, read_map(tmp_path / "evening.cc").table.lattice)


@pytest.mark.parametrize(
    ("old", "new", "complaint"),
    [
        ("<Slope>1.2 1.0 0.8</Slope>", "", "must have one Slope"),
        ("1.2 1.0 0.8", "1.2 1.0", "must be 3 numbers, and has 2"),
        ("1.2 1.0 0.8", "1.2 nan 0.8", "not finite"),
        ("1.2 1.0 0.8", "1.2 much 0.8", "no number"),
        ("<Saturation>1.3", "<Saturation>-1", "0 or more"),
        ("<Description>evening light</Description>", "<Warmth>3</Warmth>", "holds 'Warmth'"),
        ("ColorCorrection", "Recipe", "its root is Recipe"),
        ("</ColorCorrection>", "", "not a decision list"),
        ("<ColorCorrection", '<!DOCTYPE a [<!ENTITY b "c">]><ColorCorrection', "document type or entities"),
    ],
)
def test_a_broken_decision_list_is_refused(old: str, new: str, complaint: str, tmp_path: Path) -> None:
    path = tmp_path / "grade.cc"
    path.write_text(CORRECTION.format(name="one", power=1.2).replace(old, new), encoding="utf-8")

    with pytest.raises(MapFileError, match=complaint):
        read_map(path)


def test_a_correction_cannot_be_chosen_from_a_table(tmp_path: Path) -> None:
    path = tmp_path / "list.clf"
    path.write_text(listed(MATRIX), encoding="utf-8")
    with pytest.raises(MapFileError, match="hold corrections"):
        read_map(path, correction="one")
