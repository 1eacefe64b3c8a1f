"""Ratios of two pieces of work, timed in turns within one run, so that a busy or slow machine burdens both alike."""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Callable
from typing import Any

import attrs
import numpy as np

Work = Callable[[], object]


@attrs.frozen(kw_only=True)
class Ratio:
    """Work over what it is measured against.

    Attributes:
        name: what was compared, in words.
        median: median of the ratios of the single turns.
        low: lower quartile.
        high: upper quartile.
        milliseconds: median time of the work.
        against: median time of the other.
        turns: how many were timed.
        must: largest accepted ratio, or None.
        aim: ratio to aim for, or None.
    """

    name: str
    median: float
    low: float
    high: float
    milliseconds: float
    against: float
    turns: int
    must: float | None = None
    aim: float | None = None

    @property
    def holds(self) -> bool:
        """Whether the must-bar is met; true where there is none."""
        return self.must is None or self.median <= self.must

    def as_dict(self) -> dict[str, Any]:
        return {**attrs.asdict(self), "holds": self.holds}


def compare(
    name: str, work: Work, against: Work, *, turns: int = 7, must: float | None = None, aim: float | None = None
) -> Ratio:
    """Time two pieces of work in turns, after one turn of each that does not count."""
    work(), against()
    first, second = [], []
    for _ in range(turns):
        first.append(seconds(work))
        second.append(seconds(against))
    return ratio_of(name, first, second, must=must, aim=aim)


def ratio_of(
    name: str, first: list[float], second: list[float], *, must: float | None = None, aim: float | None = None
) -> Ratio:
    """Sum up the times, in seconds, of turns of two pieces of work."""
    ratios = np.array(first) / np.array(second)
    low, median, high = (float(value) for value in np.quantile(ratios, [0.25, 0.5, 0.75]))
    return Ratio(
        name=name,
        median=median,
        low=low,
        high=high,
        milliseconds=1000 * float(np.median(first)),
        against=1000 * float(np.median(second)),
        turns=len(first),
        must=must,
        aim=aim,
    )


def seconds(work: Work) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def both_seconds(work: Work) -> tuple[float, float]:
    """Return wall time and processor time of all threads; the second hardly depends on what else the machine does."""
    processor = time.process_time()
    wall = seconds(work)
    return wall, time.process_time() - processor


_PEAK = """
{code}
from pathlib import Path
print(next(line for line in Path("/proc/self/status").read_text().splitlines() if line.startswith("VmHWM")).split()[1])
"""


def peak_megabytes(code: str) -> float:
    """Run Python code in a process of its own and return the largest memory it held, in MB (Linux).

    The kernel's high-water mark of the process, for `getrusage` would count what its parent held.
    """
    done = subprocess.run([sys.executable, "-c", _PEAK.format(code=code)], capture_output=True, text=True, check=True)
    return float(done.stdout.split()[-1]) * 1024 / 1e6
