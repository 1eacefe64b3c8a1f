"""Control limits against handbooks' tables and worked examples."""

from __future__ import annotations

import math

import numpy as np
import pytest

from hueferry.drift import limits as m
from hueferry.errors import InputError

FLOW = np.array([49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1])
"""NIST/SEMATECH e-Handbook 6.3.2.2: flow rate of ten batches."""
BATCHES = np.concatenate([[52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0, 50.1, 51.2, 50.5], FLOW])
"""NIST/SEMATECH e-Handbook 6.3.2.4."""


@pytest.mark.parametrize(
    ("size", "d2", "d3", "c4", "a2", "upper_range", "e2", "a3", "upper_deviation"),
    [
        (2, 1.128379, 0.852502, 0.797885, 1.879971, 3.266532, 2.658681, 2.65868, 3.26653),
        (3, 1.692569, 0.888368, 0.886227, 1.023327, 2.574591, 1.772454, 1.95441, 2.56817),
        (4, 2.058751, 0.879808, 0.921318, 0.728597, 2.282052, 1.457194, 1.62810, 2.26605),
        (5, 2.325929, 0.864082, 0.939986, 0.576819, 2.114499, 1.289807, 1.42730, 2.08900),
        (6, 2.534413, 0.848040, 0.951533, 0.483246, 2.003830, 1.183706, 1.28713, 1.96964),
        (10, 3.077505, 0.797051, 0.972659, 0.308264, 1.776977, 0.974815, 0.97535, 1.71629),
    ],
)
def test_constants_of_ranges_and_deviations(size, d2, d3, c4, a2, upper_range, e2, a3, upper_deviation) -> None:
    """Tables: ASTM Manual 7; Montgomery, appendix VI (values recomputed from order statistics)."""
    constants = m.range_constants(size)

    assert (constants.d2, constants.d3, constants.c4) == pytest.approx((d2, d3, c4), abs=1e-6)
    assert (constants.mean_by_range, constants.individual_by_range) == pytest.approx((a2, e2), abs=1e-6)
    assert constants.range_limits[1] == pytest.approx(upper_range, abs=2e-6)
    assert constants.mean_by_deviation == pytest.approx(a3, abs=5e-6)
    assert constants.deviation_limits[1] == pytest.approx(upper_deviation, abs=5e-6)


def test_lower_limits_are_zero_until_they_are_not() -> None:
    """D3 = 0 up to n = 6 and .223023 at 10; B3 = .03036 at 6 and .28371 at 10 (the same tables)."""
    assert m.range_constants(6).range_limits[0] == 0
    assert m.range_constants(10).range_limits[0] == pytest.approx(0.223023, abs=2e-6)
    assert m.range_constants(5).deviation_limits[0] == 0
    assert m.range_constants(6).deviation_limits[0] == pytest.approx(0.03036, abs=5e-6)
    assert m.range_constants(10).deviation_limits[0] == pytest.approx(0.28371, abs=5e-6)


def test_two_readings_have_closed_forms() -> None:
    assert m.range_constants(2).d2 == pytest.approx(2 / math.sqrt(math.pi), abs=1e-12)
    assert m.range_constants(2).c4 == pytest.approx(math.sqrt(2 / math.pi), abs=1e-12)


def test_vane_openings() -> None:
    """Montgomery & Runger, chapter 16: 20 samples of 5, grand mean 33.32, mean range 5.8."""
    constants = m.range_constants(5)

    assert 33.32 + constants.mean_by_range * 5.8 == pytest.approx(36.67, abs=6e-3)
    assert 33.32 - constants.mean_by_range * 5.8 == pytest.approx(29.97, abs=6e-3)
    assert constants.range_limits[1] * 5.8 == pytest.approx(12.27, abs=6e-3)


def test_hard_bake_widths() -> None:
    """Montgomery, Introduction to Statistical Quality Control: 1.5056 and .32521, A2 .577, D4 2.114."""
    constants = m.range_constants(5)

    assert 1.5056 + constants.mean_by_range * 0.32521 == pytest.approx(1.69325, abs=1e-4)
    assert 1.5056 - constants.mean_by_range * 0.32521 == pytest.approx(1.31795, abs=1e-4)
    assert constants.range_limits[1] * 0.32521 == pytest.approx(0.68749, abs=2e-4)


def test_flow_rates_are_in_control() -> None:
    """NIST 6.3.2.2: mean 50.81, mean moving range 1.8778, limits 55.8041 and 45.8159 with d2 = 1.128; exact d2 here."""
    ranges = m.moving_ranges(FLOW)
    level = m.estimate_level(FLOW)
    known = m.Level(level.centre, level.deviation)

    assert ranges == pytest.approx([2.0, 2.3, 1.4, 3.5, 3.4, 1.4, 0.2, 1.2, 1.5], abs=1e-9)
    assert (level.centre, ranges.mean()) == pytest.approx((50.81, 1.8778), abs=5e-5)
    assert level.centre + known.width() == pytest.approx(55.80241, abs=5e-5)
    assert level.centre - known.width() == pytest.approx(45.81759, abs=5e-5)
    assert level.centre + known.width() == pytest.approx(55.8041, abs=2e-3)
    assert np.abs(FLOW - level.centre).max() < known.width()


def test_the_deviation_is_that_of_moving_ranges_and_not_of_all_readings() -> None:
    """1.66470 with d2 = 1.128, against a sample deviation of 2.03385: a drift hides in the latter."""
    assert m.estimate_level(FLOW).deviation == pytest.approx(1.66470, abs=1e-3)
    assert np.std(FLOW, ddof=1) == pytest.approx(2.03385, abs=5e-6)


def test_the_limit_of_moving_ranges() -> None:
    """3.267 · 1.8778 = 6.1347."""
    assert m.range_limit(FLOW) == pytest.approx(6.1347, abs=1.5e-3)


def test_weighted_averages_of_batches() -> None:
    """NIST 6.3.2.4, table; its rounding leaves at most .0048."""
    printed = [50.60, 49.52, 50.56, 50.18, 50.16, 49.21, 49.75, 49.85, 50.26, 50.33, 50.11, 49.36, 49.52, 50.05, 49.38]
    printed += [49.92, 50.73, 51.23, 51.94, 51.99]

    averages = m.weighted_average(BATCHES, 50.0, memory=0.3)

    assert averages == pytest.approx(printed, abs=5.1e-3)


def test_limits_of_weighted_averages() -> None:
    """NIST 6.3.2.4: s = 2.0539, λ = .3: 52.5884 and 47.4115 in the long run; start-up: Montgomery."""
    level = m.Level(50.0, 2.0539)
    shares = m.average_share(np.array([1, 2, 5, 20, 10_000]), memory=0.3)

    widths = [level.width(float(share)) for share in shares]

    assert widths[:4] == pytest.approx([1.84851, 2.25639, 2.55161, 2.58843], abs=5e-6)
    assert (50 + widths[4], 50 - widths[4]) == pytest.approx((52.588432, 47.411568), abs=1e-6)
    assert (np.abs(m.weighted_average(BATCHES, 50.0, memory=0.3) - 50) < widths[4]).all()


def test_known_limits_of_single_readings_run_370_readings() -> None:
    """P(beyond 3 σ) = .0026998 for a normal reading: one in 370.398."""
    beyond = math.erfc(m.Level(0.0, 1.0).width() / math.sqrt(2))

    assert beyond == pytest.approx(0.0026998, abs=5e-8)
    assert 1 / beyond == pytest.approx(370.398, abs=1e-3)


def test_estimated_limits_are_wider_and_tend_to_the_known_ones() -> None:
    widths = [m.Level(0.0, 1.0, readings).width() for readings in (5, 12, 50, 100_000)]

    assert widths == sorted(widths, reverse=True)
    assert widths[-1] == pytest.approx(3.0, abs=1e-3)


def test_estimated_limits_alarm_as_rarely_as_known_ones() -> None:
    """By simulation: a new reading is beyond limits from 12 readings in about .0027 of cases."""
    rng = np.random.default_rng(0)
    series = rng.normal(size=(40_000, 13))
    deviation = np.abs(np.diff(series[:, :12], axis=1)).mean(axis=1) / m.range_constants(2).d2
    distance = np.abs(series[:, 12] - series[:, :12].mean(axis=1))

    share = float(np.mean(distance > deviation * m.Level(0.0, 1.0, 12).width()))

    assert 0.0013 < share < 0.0045
    assert float(np.mean(distance > 3 * deviation)) > 0.01


def test_estimated_limits_of_averages_allow_for_the_error_of_the_centre() -> None:
    """By simulation: an average of 12 new readings against 12 old ones is as rarely beyond as at three deviations.

    Its variance is 1/12, and the centre's error has the same: limits without the latter would be too narrow by √2.
    """
    rng = np.random.default_rng(0)
    series = rng.normal(size=(40_000, 24))
    deviation = np.abs(np.diff(series[:, :12], axis=1)).mean(axis=1) / m.range_constants(2).d2
    distance = np.abs(series[:, 12:].mean(axis=1) - series[:, :12].mean(axis=1))

    share = float(np.mean(distance > deviation * m.Level(0.0, 1.0, 12).width(1 / 12)))

    assert 0.0006 < share < 0.0045


@pytest.mark.parametrize("call", [lambda: m.range_constants(1), lambda: m.estimate_level(np.array([1.0]))])
def test_one_reading_has_no_limits(call) -> None:
    with pytest.raises(InputError, match=r"at least 2|two readings"):
        call()
