"""Run rules on series made to meet them, and on ones that just do not."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.drift.rules import RULES


def found(rule: str, values: list[float]) -> list[int]:
    return np.flatnonzero(RULES[rule].find(np.array(values))).tolist()


@pytest.mark.parametrize(
    ("rule", "values", "marks"),
    [
        ("beyond", [0, 3.01, -3.2, 2.9], [1, 2]),
        ("two of three", [2.1, 0, 2.1, 0, 0], [2]),
        ("two of three", [2.1, 0, -2.1, 0, 0], []),  # on two sides
        ("two of three", [2.1, 0, 0, 2.1], []),  # four apart
        ("four of five", [1.1, 1.2, 0, 1.3, 1.1], [4]),
        ("four of five", [1.1, 1.2, 0, 0, 1.3, 1.1], []),
        ("one side", [0.1] * 9, [7, 8]),
        ("one side", [0.1] * 7 + [-0.1] * 7, []),
        ("one side", [0.0] * 12, []),  # on the centre is on no side
        ("trend", [0, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6], [5, 6]),
        ("trend", [0, 0.1, 0.2, 0.3, 0.4, 0.3, 0.2], []),
        ("trend", [0, -0.1, -0.2, -0.3, -0.4, -0.5], [5]),
        ("trend", [0.2] * 9, []),
    ],
)
def test_patterns(rule: str, values: list[float], marks: list[int]) -> None:
    """Western Electric (1956), Statistical Quality Control Handbook; Nelson (1984), JQT 16:237-239."""
    assert found(rule, values) == marks


@pytest.mark.parametrize("rule", RULES)
@pytest.mark.parametrize("length", [0, 1, 2])
def test_short_series_meet_no_rule(rule: str, length: int) -> None:
    assert found(rule, [0.1] * length) == []


@pytest.mark.parametrize("rule", RULES)
def test_rules_do_not_care_which_side(rule: str) -> None:
    values = np.random.default_rng(0).normal(size=400)

    assert (RULES[rule].find(values) == RULES[rule].find(-values)).all()


def test_single_readings_beyond_three_deviations_are_as_rare_as_they_should_be() -> None:
    """One in 370.4."""
    marks = RULES["beyond"].find(np.random.default_rng(0).normal(size=400_000))

    assert 1 / marks.mean() == pytest.approx(370.4, rel=0.1)


def test_eight_on_one_side_are_as_rare_as_eight_tosses() -> None:
    """Runs of eight begin at a rate of 2 · ½⁸ · ½ a reading; each has two readings' worth of marks on average."""
    marks = RULES["one side"].find(np.random.default_rng(1).normal(size=400_000))

    assert marks.mean() == pytest.approx(2 * 0.5**8, rel=0.1)
