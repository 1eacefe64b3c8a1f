"""What a chart says of devices whose drift is known."""

from __future__ import annotations

import attrs
import numpy as np
import pytest

from drift.series_of import SCATTER, WEEKS_A_MONTH, readings
from hueferry.drift.chart import State, chart
from hueferry.errors import InputError

MONTH_4 = int(4 * WEEKS_A_MONTH) + 1  # weekly readings from day 0 to the last before four months are over: 18


def first_alarm(seed: int, weeks: int, **drift: float) -> float:
    alarms = np.any([trace.alarms for trace in chart(readings(seed, weeks, **drift)).traces], axis=0)
    return float(np.argmax(alarms)) if alarms.any() else np.inf


def test_a_drift_of_half_a_unit_a_month_is_flagged_by_month_four() -> None:
    found = chart(readings(1, MONTH_4, monthly=0.5))

    assert found.state is State.DRIFTING
    assert "yellower" in found.sentence


def test_it_is_flagged_by_month_four_for_nearly_every_seed() -> None:
    """Of 500 scanners that scatter by 0.2 in each channel, from the first reading on drifting."""
    flagged = [first_alarm(seed, MONTH_4, monthly=0.5) < np.inf for seed in range(500)]

    assert np.mean(flagged) >= 0.95


def test_twenty_four_stable_months_raise_no_alarm() -> None:
    found = chart(readings(1, 104))

    assert found.state is State.STEADY
    assert not any(trace.alarms.any() for trace in found.traces)
    assert found.sentence.startswith("No drift: 104 readings")


def test_stable_scanners_seldom_alarm() -> None:
    """Of 500 scanners over 24 months each, at most one in 16 raises an alarm: a mean run of over 30 years."""
    alarmed = [first_alarm(seed, 104) < np.inf for seed in range(500)]

    assert np.mean(alarmed) <= 0.06


def test_since_when_in_which_direction_and_how_much() -> None:
    """Steady for 20 weeks, then 0.8 a month along a known direction for 30: all three are told."""
    found = chart(readings(5, 50, monthly=0.8, begin=20))

    drift = found.drift
    assert drift is not None
    assert drift.since == pytest.approx(20, abs=6)
    assert drift.alarm >= drift.since
    total = 0.8 * 28 / WEEKS_A_MONTH  # where it was at the middle of the last four readings
    assert drift.total == pytest.approx(total, abs=3 * SCATTER)
    assert drift.rate == pytest.approx(0.8, rel=0.15)
    lightness, a, b = np.array(drift.shifts) / drift.total
    assert (lightness, a, b) == pytest.approx((-0.3, 0.1, 0.95), abs=0.1)
    assert found.sentence.startswith("Since 2026-")
    assert "yellower (b* +" in found.sentence
    assert "darker (L* −" in found.sentence
    assert "a month" in found.sentence


def test_a_sudden_step_is_told_without_a_rate() -> None:
    series = readings(2, 40)
    stepped = [attrs.evolve(r, l=r.l - 2.0) if i >= 25 else r for i, r in enumerate(series)]

    found = chart(stepped)

    assert found.drift is not None
    assert found.drift.since == pytest.approx(25, abs=1)
    assert found.drift.rate is None
    assert "darker (L* −" in found.sentence


def test_a_device_that_was_repaired_is_back() -> None:
    series = readings(3, 60)
    repaired = [attrs.evolve(r, b=r.b + 3.0) if 20 <= i < 30 else r for i, r in enumerate(series)]

    found = chart(repaired)

    assert found.state is State.BACK
    assert found.drift is None
    assert found.sentence.startswith("Back within its limits since 2026-")


def test_readings_of_the_past_do_not_change_when_new_ones_come() -> None:
    """Limits rest on the first twelve readings: an alarm once raised stays, and none is raised afterwards."""
    whole, part = chart(readings(4, 60, monthly=0.3)), chart(readings(4, 40, monthly=0.3))

    for long, short in zip(whole.traces, part.traces, strict=True):
        assert (long.averages[:40] == short.averages).all()
        assert (long.alarms[:40] == short.alarms).all()


def test_few_readings_say_nothing() -> None:
    found = chart(readings(1, 7))

    assert found.state is State.TOO_FEW
    assert "7 so far, 8 are needed" in found.sentence


def test_the_order_of_the_list_does_not_matter() -> None:
    series = readings(1, 30, monthly=0.5)

    assert chart(series[::-1]).sentence == chart(series).sentence


def test_notices_come_with_a_trend_and_name_their_rule() -> None:
    found = chart(readings(1, 40, monthly=0.5))

    assert {"b"} <= {notice.channel for notice in found.notices}
    assert {"one side", "beyond"} <= {notice.rule for notice in found.notices}


@pytest.mark.parametrize("value", [0.0, 0.1, 0.5, -7.3])
def test_a_device_without_any_scatter_is_steady(value: float) -> None:
    same = [attrs.evolve(r, l=value, a=value, b=-value) for r in readings(1, 20)]

    found = chart(same)

    assert found.state is State.STEADY
    assert found.notices == ()


def test_two_devices_do_not_share_a_chart() -> None:
    with pytest.raises(InputError, match="one device"):
        chart(readings(1, 9) + readings(2, 9, device="other"))


@pytest.mark.parametrize(("baseline", "memory"), [(7, 0.2), (12, 0.0), (12, 1.5)])
def test_baselines_and_memories_out_of_range_are_refused(baseline: int, memory: float) -> None:
    with pytest.raises(InputError, match="give no chart"):
        chart(readings(1, 20), baseline=baseline, memory=memory)
