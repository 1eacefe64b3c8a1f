"""Tetrahedral interpolation: worked values, OpenColorIO as the oracle, and laws."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hueferry.tables.lookup import look_up, node_codes
from hueferry.tables.table import Table

# Blue fastest, as in a Common LUT Format file (Academy S-2014-006, LUT3D).
CORNERS = np.array(
    [
        [0.00, 0.00, 0.00],
        [0.05, 0.02, 0.90],
        [0.10, 0.80, 0.06],
        [0.07, 0.85, 0.95],
        [0.90, 0.04, 0.03],
        [0.92, 0.09, 0.88],
        [0.96, 0.91, 0.11],
        [1.00, 1.00, 1.00],
    ]
).reshape(2, 2, 2, 3)


@pytest.mark.parametrize(
    ("codes", "wanted"),
    [
        ((0.25, 0.50, 0.75), (0.2800, 0.4675, 0.7125)),
        ((0.75, 0.50, 0.25), (0.7150, 0.4875, 0.2850)),
        ((0.50, 0.25, 0.75), (0.4925, 0.2775, 0.6950)),
        ((0.20, 0.60, 0.40), (0.2340, 0.5300, 0.4020)),
        ((0.60, 0.20, 0.40), (0.5640, 0.2260, 0.3820)),
        ((0.40, 0.60, 0.20), (0.4120, 0.5420, 0.2340)),
        ((0.50, 0.50, 0.50), (0.5, 0.5, 0.5)),
        ((1.0, 0.0, 0.0), (0.90, 0.04, 0.03)),
        ((0.0, 1.0, 0.0), (0.10, 0.80, 0.06)),
        ((0.0, 0.0, 1.0), (0.05, 0.02, 0.90)),
        ((0.60, 0.30, 0.60), (0.576, 0.327, 0.564)),
        ((0.30, 0.30, 0.60), (0.315, 0.306, 0.570)),
        ((-0.2, 0.5, 1.3), (0.060, 0.435, 0.925)),
    ],
)
def test_one_of_each_tetrahedron_ties_and_clamping(codes: tuple[float, ...], wanted: tuple[float, ...]) -> None:
    """Worked by hand from the definition in Academy S-2014-006, appendix A, and equal to OpenColorIO within 1e-7."""
    assert look_up(Table(CORNERS), np.array([codes])) == pytest.approx(np.array([wanted]), abs=1e-6)


def test_reading_agrees_with_opencolorio_on_a_random_table_with_curves() -> None:
    import PyOpenColorIO

    rng = np.random.default_rng(5)
    steps = rng.uniform(0.2, 1.0, (3, 64))
    curves = np.concatenate([np.zeros((3, 1)), np.cumsum(steps, axis=1)], axis=1)
    curves = (curves / curves[:, -1:]).astype(np.float32)
    table = Table(rng.random((5, 5, 5, 3)), curves)
    codes = rng.uniform(-0.2, 1.2, (5000, 3)).astype(np.float32)
    group = PyOpenColorIO.GroupTransform()
    group.appendTransform(PyOpenColorIO.Lut1DTransform(65, False))
    group[0].setData(np.ascontiguousarray(curves.T).ravel())
    group.appendTransform(PyOpenColorIO.Lut3DTransform(5))
    group[1].setInterpolation(PyOpenColorIO.INTERP_TETRAHEDRAL)
    group[1].setData(table.lattice.ravel())
    oracle = codes.copy()
    PyOpenColorIO.Config.CreateRaw().getProcessor(group).getDefaultCPUProcessor().applyRGB(oracle)

    assert look_up(table, codes) == pytest.approx(oracle, abs=3e-6)


@given(seed=st.integers(0, 2**32 - 1), size=st.integers(2, 9))
def test_a_table_of_an_affine_function_is_that_function_everywhere(seed: int, size: int) -> None:
    rng = np.random.default_rng(seed)
    matrix, offset = rng.normal(size=(3, 3)), rng.normal(size=3)
    red, green, blue = node_codes(size, None)
    nodes = np.stack(np.meshgrid(red, green, blue, indexing="ij"), axis=-1)
    codes = rng.random((100, 3))

    assert look_up(Table(nodes @ matrix.T + offset), codes) == pytest.approx(codes @ matrix.T + offset, abs=5e-6)


def test_any_shape_that_ends_in_three_comes_back_as_it_was() -> None:
    codes = np.random.default_rng(0).random((4, 5, 3))

    assert look_up(Table(CORNERS), codes).shape == (4, 5, 3)
    assert np.array_equal(look_up(Table(CORNERS), codes).reshape(-1, 3), look_up(Table(CORNERS), codes.reshape(-1, 3)))
