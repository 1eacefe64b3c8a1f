"""Work shared out over the processors, in an order of its own."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

Item = TypeVar("Item")
Result = TypeVar("Result")


def processors() -> int:
    """Return how many processors this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def each(work: Callable[[Item], Result], items: Iterable[Item]) -> list[Result]:
    """Return the result of `work` for every item, in their order; as many threads as there are processors.

    For work that leaves the interpreter lock most of the time: large arrays, codecs.
    """
    waiting = list(items)
    count = min(processors(), len(waiting))
    if count <= 1:
        return [work(item) for item in waiting]
    with ThreadPoolExecutor(count) as pool:
        return list(pool.map(work, waiting))
