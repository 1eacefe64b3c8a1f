"""Control charts of a device: since when, in which direction and how much it has drifted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from enum import StrEnum
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import read_only
from hueferry.drift.limits import (
    Level,
    average_share,
    estimate_level,
    moving_ranges,
    range_limit,
    weighted_average,
)
from hueferry.drift.reading import Reading
from hueferry.drift.rules import RULES
from hueferry.errors import InputError

Series = NDArray[np.float64]

MEMORY = 0.2
"""Weight of the newest reading in the moving average; 0.2 … 0.3 is usual for slow changes."""
BASELINE = 12
"""Readings, from the first, that limits are estimated from."""
LEAST = 8
"""Readings below which nothing can be said."""
SINGLE_SIGMAS = 3.0
ALARM_SIGMAS = 3.32
"""Three channels share the false alarms of one chart at three deviations: 0.0027 / 3 each (Bonferroni)."""

_ROUNDING = 1e-9  # of the averages, where a device does not scatter at all and its limits have no width

CHANNELS: Mapping[str, tuple[str, str, str]] = MappingProxyType(
    {"l": ("L*", "darker", "lighter"), "a": ("a*", "greener", "redder"), "b": ("b*", "bluer", "yellower")}
)
"""What a channel is called, and the words for its two directions."""


class State(StrEnum):
    """What a chart says of a device."""

    TOO_FEW = "too few"
    STEADY = "steady"
    DRIFTING = "drifting"
    BACK = "back"


@attrs.frozen
class Notice:
    """A run rule that was met: worth a look, no alarm.

    Attributes:
        reading: index of the reading that completes the pattern.
        channel: "l", "a" or "b".
        rule: its name in `rules.RULES`.
    """

    reading: int
    channel: str
    rule: str


@attrs.frozen(eq=False)
class Trace:
    """One channel over time, with its limits.

    Attributes:
        channel: "l", "a" or "b".
        values: (n,) signed shifts.
        level: centre and deviation of the baseline.
        single_width: half width of the limits of single readings.
        averages: (n,) exponentially weighted moving averages, started at the centre.
        average_widths: (n,) half widths of their limits.
        ranges: (n − 1,) moving ranges.
        range_limit: upper limit of the moving ranges.
    """

    channel: str
    values: Series = attrs.field(converter=read_only)
    level: Level
    single_width: float
    averages: Series = attrs.field(converter=read_only)
    average_widths: Series = attrs.field(converter=read_only)
    ranges: Series = attrs.field(converter=read_only)
    range_limit: float

    @property
    def alarms(self) -> NDArray[np.bool_]:
        """(n,) true where the weighted average is outside its limits."""
        return np.asarray(np.abs(self.averages - self.level.centre) > self.average_widths + _ROUNDING)


@attrs.frozen
class Drift:
    """A drift that was found.

    Attributes:
        since: index of the first reading of the drift: after the last on which the average of an alarmed channel
            was still at its centre or on its other side.
        alarm: index of the reading that raised the alarm.
        shifts: change of L*, a*, b* from the baseline's centre to now.
        total: their length, ΔE*ab.
        rate: change a month (30.44 days) along that direction since then, ΔE*ab; None if it does not grow.
    """

    since: int
    alarm: int
    shifts: tuple[float, float, float]
    total: float
    rate: float | None


@attrs.frozen(eq=False)
class Chart:
    """Control charts of one device.

    Attributes:
        device: its name.
        readings: in the order of their dates.
        traces: L*, a* and b*; empty if the readings are too few.
        notices: run rules that were met.
        state: what the charts say.
        drift: the drift, if the device is drifting now.
        sentence: the answer for people.
        baseline: how many readings the limits rest on.
    """

    device: str
    readings: tuple[Reading, ...]
    traces: tuple[Trace, ...]
    notices: tuple[Notice, ...]
    state: State
    drift: Drift | None
    sentence: str
    baseline: int


def chart(readings: Sequence[Reading], *, baseline: int = BASELINE, memory: float = MEMORY) -> Chart:
    """Chart the readings of one device.

    Args:
        readings: of one device, in any order.
        baseline: readings, from the first, that limits are estimated from; fewer if there are fewer.
        memory: weight of the newest reading in the moving average, above 0 and at most 1.

    Raises:
        InputError: no readings, readings of several devices, or `baseline` or `memory` out of range.
    """
    if baseline < LEAST or not 0 < memory <= 1:
        raise InputError(f"a baseline of {baseline} and a memory of {memory} give no chart; use {LEAST} or more, 0 … 1")
    devices = sorted({reading.device for reading in readings})
    if len(devices) != 1:
        raise InputError(f"a chart is of one device, and these readings are of {len(devices)}: {devices}; name one")
    ordered = tuple(sorted(readings, key=lambda reading: reading.when))
    used = min(baseline, len(ordered))
    if len(ordered) < LEAST:
        few = f"Too few readings to tell drift from scatter: {len(ordered)} so far, {LEAST} are needed."
        return Chart(devices[0], ordered, (), (), State.TOO_FEW, None, few, used)
    traces = tuple(_trace(name, ordered, used, memory) for name in CHANNELS)
    state, drift, sentence = _judge(ordered, traces)
    return Chart(devices[0], ordered, traces, _notices(traces), state, drift, sentence, used)


def _trace(channel: str, readings: Sequence[Reading], baseline: int, memory: float) -> Trace:
    values = np.array([getattr(reading, channel) for reading in readings], dtype=np.float64)
    level = estimate_level(values[:baseline])
    shares = average_share(np.arange(1.0, len(values) + 1), memory=memory)
    return Trace(
        channel,
        values,
        level,
        level.width(sigmas=SINGLE_SIGMAS),
        weighted_average(values, level.centre, memory=memory),
        np.array([level.width(float(share), sigmas=ALARM_SIGMAS) for share in shares]),
        moving_ranges(values),
        range_limit(values[:baseline]),
    )


def _notices(traces: Sequence[Trace]) -> tuple[Notice, ...]:
    found = [
        Notice(int(index), trace.channel, name)
        for trace in traces
        if trace.single_width > 0
        for name, rule in RULES.items()
        for index in np.flatnonzero(
            rule.find((trace.values - trace.level.centre) / (trace.single_width / SINGLE_SIGMAS))
        )
    ]
    return tuple(sorted(found, key=lambda notice: (notice.reading, notice.channel)))


def _judge(readings: Sequence[Reading], traces: Sequence[Trace]) -> tuple[State, Drift | None, str]:
    alarmed = [trace for trace in traces if trace.alarms[-1]]
    if alarmed:
        drift = _drift(readings, traces, alarmed)
        return State.DRIFTING, drift, _sentence(readings, drift)
    ever = np.flatnonzero(np.any([trace.alarms for trace in traces], axis=0))
    width = max(trace.single_width for trace in traces)
    if ever.size == 0:
        words = f"No drift: {len(readings)} readings stay within what repeated readings differ by (± {width:.1f})."
        return State.STEADY, None, words
    since = readings[int(ever[-1]) + 1].when
    words = f"Back within its limits since {_day(since)}, after an alarm from {_day(readings[int(ever[0])].when)} on."
    return State.BACK, None, words


def _drift(readings: Sequence[Reading], traces: Sequence[Trace], alarmed: Sequence[Trace]) -> Drift:
    starts, first = zip(*(_start(trace) for trace in alarmed), strict=True)
    since = min(starts)
    recent = min(4, len(readings) - since)  # enough to quieten scatter, few enough to be of now
    shifts = np.array([trace.values[-recent:].mean() - trace.level.centre for trace in traces])
    total = float(np.linalg.norm(shifts))
    values = np.stack([trace.values[since:] for trace in traces], axis=1)
    rate = _monthly_rate(readings[since:], values @ shifts / total) if total > 0 else None
    return Drift(since, min(first), (float(shifts[0]), float(shifts[1]), float(shifts[2])), total, rate)


def _start(trace: Trace) -> tuple[int, int]:
    """Return the first reading of a drift and the first of its alarms.

    References:
        Nishina (1992), A comparison of control charts from the viewpoint of change-point estimation: the last time
        the weighted average was at the centre.
    """
    inside = np.flatnonzero(~trace.alarms)
    alarm = int(inside[-1]) + 1 if inside.size else 0
    side = np.sign(trace.averages - trace.level.centre)
    other = np.flatnonzero(side[: alarm + 1] != side[alarm])
    return (int(other[-1]) + 1 if other.size else 0), alarm


def _monthly_rate(readings: Sequence[Reading], along: Series) -> float | None:
    """Return the slope a month by least squares, where it is more than three times its standard error."""
    days = np.array([(reading.when - readings[0].when).total_seconds() / 86400 for reading in readings])
    centred = days - days.mean()
    squares = float(centred @ centred)
    if len(days) < 4 or squares <= 0:
        return None
    slope = float(centred @ along) / squares
    residual = along - along.mean() - slope * centred
    error = float(np.sqrt(residual @ residual / (len(days) - 2) / squares))
    return slope * 30.44 if slope > 3 * error else None


def _sentence(readings: Sequence[Reading], drift: Drift) -> str:
    parts = []
    for (label, less, more), shift in zip(CHANNELS.values(), drift.shifts, strict=True):
        if abs(shift) >= 0.25 * drift.total:
            parts.append((abs(shift), f"{more if shift > 0 else less} ({label} {_signed(shift)})"))
    direction = " and ".join(words for _, words in sorted(parts, reverse=True))
    growth = "" if drift.rate is None else f", growing by about {drift.rate:.1f} a month"
    return (
        f"Since {_day(readings[drift.since].when)} it has become {direction}: {drift.total:.1f} ΔE*ab in all{growth}."
    )


def _signed(value: float) -> str:
    return f"{value:+.1f}".replace("-", "−")


def _day(when: object) -> str:
    return f"{when:%Y-%m-%d}"
