"""The nearest decision list: found again where the table is one, and honest where it cannot be."""

from __future__ import annotations

import numpy as np

from hueferry.colour.encoding import SRGB
from hueferry.tables.build import sample_table
from hueferry.tables.cdl import DecisionList
from hueferry.tables.fit_cdl import fit_decision_list

CODES = np.random.default_rng(7).uniform(0.15, 0.8, (400, 3))
WEIGHTS = np.full(400, 1 / 400)


def test_a_table_of_a_decision_list_gives_it_back() -> None:
    grade = DecisionList((1.1, 0.95, 0.9), (-0.02, 0.01, 0.03), (0.95, 1.05, 1.1), 1.15)
    fitted = fit_decision_list(sample_table(grade, size=65), CODES, WEIGHTS, SRGB)
    assert fitted.mean < 0.05
    np.testing.assert_allclose(fitted.grade.slope, grade.slope, atol=0.02)
    np.testing.assert_allclose(fitted.grade.saturation, grade.saturation, atol=0.01)


def test_exchanged_channels_are_beyond_a_decision_list() -> None:
    fitted = fit_decision_list(sample_table(lambda codes: codes[:, ::-1], size=5), CODES, WEIGHTS, SRGB)
    assert fitted.mean > 5
