"""Decision lists against hand calculation by the published formula, and against OpenColorIO."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import PyOpenColorIO
import pytest

from hueferry.errors import InputError
from hueferry.tables.cdl import DecisionList, cc_text

GRADE = DecisionList((1.2, 1.0, 0.8), (-0.05, 0.02, 0.0), (0.9, 1.0, 1.2), 1.3)


@pytest.mark.parametrize(
    ("codes", "expected"),
    [
        ((0.4, 0.5, 0.6), (0.457836926, 0.525610953, 0.388417466)),
        ((0.25, 0.5, 0.75), (0.231705936, 0.534378970, 0.562625723)),
        ((1.0, 0.0, 0.02), (1.0, 0.0, 0.0)),
        ((0.02, 0.01, 0.9), (0.0, 0.017959683, 0.855440364)),
        ((1.0, 1.0, 1.0), (1.0, 1.0, 0.699694924)),
    ],
)
def test_worked_values(codes: tuple[float, ...], expected: tuple[float, ...]) -> None:
    assert GRADE(np.array([codes]))[0] == pytest.approx(expected, abs=1e-8)


def test_the_parameters_of_the_academy_example() -> None:
    grade = DecisionList((1.0, 1.0, 0.9), (-0.03, -0.02, 0.0), (1.25, 1.0, 1.0), 1.7)
    assert grade(np.array([[0.18, 0.18, 0.18]]))[0] == pytest.approx((0.056512690, 0.169817781, 0.173217781), abs=1e-8)


def test_a_written_correction_is_what_opencolorio_reads(tmp_path: Path) -> None:
    path = tmp_path / "grade.cc"
    path.write_text(cc_text(GRADE), encoding="utf-8")
    read = PyOpenColorIO.CDLTransform.CreateFromFile(str(path), "hueferry")
    read.setStyle(PyOpenColorIO.CDL_ASC)
    processor = PyOpenColorIO.Config.CreateRaw().getProcessor(read)
    cpu = processor.getOptimizedCPUProcessor(PyOpenColorIO.OPTIMIZATION_NONE)
    codes = np.random.default_rng(5).random((20_000, 3)).astype(np.float32)
    theirs = codes.copy()
    cpu.applyRGB(theirs)
    assert np.abs(GRADE(codes.astype(np.float64)) - theirs).max() < 1e-6


@pytest.mark.parametrize("wrong", [{"slope": (-1, 1, 1)}, {"power": (0, 1, 1)}, {"saturation": float("nan")}])
def test_what_is_no_decision_list_is_refused(wrong: dict[str, object]) -> None:
    with pytest.raises(InputError, match="decision list"):
        DecisionList(**wrong)  # type: ignore[arg-type]
