"""The quick subset of the benchmark, with bars; `PYTHONPATH=tests python -m truth` is the whole of it."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest

from hueferry.evidence.camera import SIZE, CameraMap
from truth.cases import make_cases
from truth.grades import Grade, draw_grade
from truth.pictures import HELD, TUNED
from truth.run import run
from truth.score import Score, mean_error, summarise

CONFIRMATION_SEED = 1000
NO_GRADE = Grade(0.0, np.ones(3), 1.0 - 1e-9, 1.0, 1.0, 0.0)


@cache
def scores(group: str) -> tuple[Score, ...]:
    """Score `agree` on every picture of the set, a grade each that nothing was tuned on."""
    cases = make_cases(TUNED + HELD[:3], groups=[group], seeds=[CONFIRMATION_SEED], long_side=320)
    return tuple(run(cases, ["agree"], most=8000))


def test_no_grade_is_no_change() -> None:
    pixels = np.random.default_rng(0).integers(0, 256, (50, 50, 3), dtype=np.uint8)

    assert np.array_equal(NO_GRADE(pixels), pixels)


def test_the_right_answer_scores_zero_and_no_map_scores_none() -> None:
    case = next(iter(make_cases(TUNED[:1], groups=["crop"], seeds=[0], long_side=128)))

    assert mean_error(None, case.wanted, case.wanted) == 0
    assert mean_error(CameraMap(np.zeros(SIZE)), case.source, case.wanted) == pytest.approx(
        mean_error(None, case.source, case.wanted), abs=0.01
    )


def test_grades_differ_by_seed_and_repeat() -> None:
    first, again, other = (draw_grade(np.random.default_rng(seed)) for seed in (1, 1, 2))

    assert first.stops == again.stops
    assert first.stops != other.stops


@pytest.mark.parametrize(("group", "bar"), [("same", 0.45), ("overlap", 1.0), ("crop", 1.0)])
def test_common_surfaces_end_the_matter(group: str, bar: float) -> None:
    summary = summarise(scores(group))["agree", group]

    assert summary.mean <= bar
    assert summary.harmed == 0


def test_halves_get_nearer_and_are_not_harmed_much() -> None:
    summary = summarise(scores("halves"))["agree", "halves"]

    assert summary.ratio <= 0.85
    assert summary.harmed <= 0.15
    assert summary.worst <= 1.5


def test_strangers_are_left_alone() -> None:
    summary = summarise(scores("strangers"))["agree", "strangers"]

    assert summary.ratio <= 1.0
    assert summary.harmed <= 0.10
    assert summary.worst <= 1.5
