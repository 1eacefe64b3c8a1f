"""Run rules: patterns of readings that chance seldom makes.

A rule sees readings as z, their distance from the centre in standard deviations, and tells at which of them the
pattern is complete.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

Series = NDArray[np.float64]
Marks = NDArray[np.bool_]


@attrs.frozen
class Rule:
    """A pattern, who described it, and how it is found.

    Attributes:
        words: what was seen, for people.
        source: who described it.
        find: from (n,) z to (n,) true where the pattern is complete.
    """

    words: str
    source: str
    find: Callable[[Series], Marks]


def beyond(z: Series, *, sigmas: float = 3.0) -> Marks:
    """Mark readings more than three deviations out."""
    return np.abs(z) > sigmas


def some_beyond(z: Series, *, needed: int, of: int, sigmas: float) -> Marks:
    """Mark readings that complete `needed` of `of` readings beyond `sigmas` on one side, themselves among them."""
    marks = np.zeros(len(z), dtype=bool)
    for side in (z > sigmas, z < -sigmas):
        total = np.concatenate([np.zeros(of, dtype=int), np.cumsum(side)])
        marks |= side & (total[of:] - total[:-of] >= needed)
    return marks


def one_side(z: Series, *, length: int = 8) -> Marks:
    """Mark readings that complete `length` in a row on one side of the centre."""
    return _run_of(np.sign(z), length)


def trend(z: Series, *, length: int = 6) -> Marks:
    """Mark readings that complete `length` in a row that only rise or only fall."""
    steps = np.sign(np.diff(z))
    return np.concatenate([np.zeros(min(len(z), 1), dtype=bool), _run_of(steps, length - 1)])


def _run_of(signs: Series, length: int) -> Marks:
    marks = np.zeros(len(signs), dtype=bool)
    run = 0
    for index, sign in enumerate(signs):
        run = run + 1 if index and sign == signs[index - 1] else 1
        marks[index] = sign != 0 and run >= length
    return marks


RULES: Mapping[str, Rule] = MappingProxyType(
    {
        "beyond": Rule("beyond three deviations", "Shewhart (1931)", beyond),
        "two of three": Rule(
            "two of three beyond two deviations",
            "Western Electric (1956)",
            lambda z: some_beyond(z, needed=2, of=3, sigmas=2.0),
        ),
        "four of five": Rule(
            "four of five beyond one deviation",
            "Western Electric (1956)",
            lambda z: some_beyond(z, needed=4, of=5, sigmas=1.0),
        ),
        "one side": Rule("eight in a row on one side", "Western Electric (1956)", one_side),
        "trend": Rule("six in a row rising or falling", "Nelson (1984)", trend),
    }
)
"""Rules that give a notice. An alarm comes from the weighted average alone: all rules together cry too often."""
