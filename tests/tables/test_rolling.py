"""Rolling off what would leave the code range: laws of the curve, and what it does to grays and to the rest."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hueferry.arrays import Codes
from hueferry.tables.build import sample_table
from hueferry.tables.cells import Occupied
from hueferry.tables.folds import determinants
from hueferry.tables.rolling import RollOff, roll_into_range

codes = np.random.default_rng(0).random((500, 3))
OCCUPIED = Occupied(codes, np.full(500, 1 / 500))


@given(most=st.floats(1.001, 3.0), widest=st.floats(0.01, 0.5))
def test_the_curve_rises_everywhere_starts_as_the_identity_and_ends_at_one(most: float, widest: float) -> None:
    curve = RollOff(most, widest)
    line = np.linspace(-1, most + 1, 4001)

    rolled = curve(line)

    assert (np.diff(rolled) > 0).all()
    assert np.array_equal(rolled[line <= curve.knee], line[line <= curve.knee])
    assert curve(np.array([most]))[0] == pytest.approx(1.0)
    step = 1e-7
    assert (curve(np.array([curve.knee + step]))[0] - curve.knee) / step == pytest.approx(1.0, abs=1e-3)


def test_a_picture_that_fits_is_left_alone() -> None:
    def gentle(values: Codes) -> Codes:
        return 0.9 * values + 0.05

    assert roll_into_range(gentle, OCCUPIED) is gentle


def test_colours_come_inside_and_grays_stay_gray() -> None:
    rolled = roll_into_range(lambda values: 1.3 * values - 0.1, OCCUPIED)

    inside = rolled(codes)
    assert inside.max() <= 1.005
    assert inside.min() >= -0.005
    grays = rolled(np.repeat(np.linspace(0, 1, 101)[:, None], 3, axis=1))
    assert np.ptp(grays, axis=1) == pytest.approx(0, abs=1e-15)


def test_middle_codes_do_not_move() -> None:
    rolled = roll_into_range(lambda values: 1.3 * values - 0.1, OCCUPIED)
    middle = np.random.default_rng(1).uniform(0.2, 0.7, (100, 3))

    assert rolled(middle) == pytest.approx(1.3 * middle - 0.1, abs=1e-15)


def test_no_cell_folds_by_it() -> None:
    matrix = np.array([[1.5, -0.3, 0.1], [-0.2, 1.4, -0.1], [0.0, -0.4, 1.6]])

    table = sample_table(roll_into_range(lambda values: (values - 0.5) @ matrix.T + 0.5, OCCUPIED), size=17)

    assert (determinants(table.lattice) > 0).all()
