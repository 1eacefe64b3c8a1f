"""How far a run of many pictures is: plain lines on stderr, one a picture."""

from __future__ import annotations

from time import monotonic
from typing import TYPE_CHECKING

from hueferry.cli.terminal import remark

if TYPE_CHECKING:
    from hueferry.record.record import Failure
    from hueferry.series.keepsake import Done
    from hueferry.series.schedule import Schedule

_FORETELL_FROM = 4
"""Pictures after which the time left is worth saying."""


class Progress:
    """Says what a run sets out to do, and what became of each picture, with the time left."""

    def __init__(self) -> None:
        self._began = monotonic()

    def begin(self, schedule: Schedule) -> None:
        """Say what an earlier run has done already, and where results get other names than their pictures."""
        for sentence in schedule.sentences:
            remark(sentence)
        self._began = monotonic()

    def step(self, number: int, count: int, outcome: Done | Failure) -> None:
        """Say what became of a picture."""
        from hueferry.record.record import Failure

        place = f"{number}/{count}{self._left(number, count)}"
        if isinstance(outcome, Failure):
            remark(f"{place}  failed: {outcome.reason}")
        else:
            remark(f"{place}  {outcome.entry.source.path}: {' '.join(outcome.entry.sentences)}")

    def _left(self, number: int, count: int) -> str:
        if number < _FORETELL_FROM or number == count:
            return ""
        pace = (monotonic() - self._began) / number
        return f" ({_rate(pace)}, {duration(pace * (count - number))} left)"


def _rate(pace: float) -> str:
    return f"{pace:.1f} s each" if pace >= 1 else f"{1 / max(pace, 1e-3):.1f} a second"


def duration(seconds: float) -> str:
    """Return a time in words that are as exact as a forecast can be."""
    if seconds < 90:
        return f"{max(1, round(seconds))} s"
    if seconds < 90 * 60:
        return f"{round(seconds / 60)} min"
    return f"{seconds / 3600:.1f} h"
