"""A function of each channel by itself as a table: its whole shape goes into the input curves.

A curve of a table cannot fall, so a channel that falls or turns back is cut where it turns: each rising or falling
piece gets one step of the lattice, and the curve says where within the step a code lies. What the table then computes
is the function itself, read linearly between the knots of the curves.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from hueferry.tables.build import CodeFunction
from hueferry.tables.misfit import Misfit, grays, misfit
from hueferry.tables.table import Table

Line = NDArray[np.float64]

_MOST_PIECES = 128
_GRAYS = 100_000
_EXACT = 5e-4
"""8-bit codes: nearer than this, more knots bring nothing that 32 bits can hold."""

_KNOTS = (1025, 4097, 16385, 65536)


def separable_table(function: CodeFunction, *, lengths: Sequence[int] = ()) -> tuple[Table, Misfit] | None:
    """Return the table of a function of each channel by itself, with the fewest knots that make it exact.

    Args:
        function: (n, 3) codes to (n, 3) codes.
        lengths: numbers of even knots that it may be linear between, such as those of its own tables.

    Returns:
        The table and its misfit; None if a channel turns back more often than a lattice has steps.
    """
    best: tuple[Table, Misfit] | None = None
    probe = grays(_GRAYS)
    for knots in sorted({2, *lengths, *_KNOTS}):
        table = _with_knots(function, knots)
        if table is None:
            continue
        found = misfit(table, function, probe)
        if best is None or found.largest < best[1].largest:
            best = table, found
        if best[1].largest < _EXACT:
            break
    return best


def _with_knots(function: CodeFunction, knots: int) -> Table | None:
    ramp = np.repeat(np.linspace(0.0, 1.0, knots)[:, None], 3, axis=1)
    values = function(ramp)
    turns = [_turns(values[:, channel]) for channel in range(3)]
    steps = max(len(found) for found in turns) - 1
    if steps > min(_MOST_PIECES, knots - 1):
        return None
    cuts = [_cut_into(found, steps) for found in turns]
    curves = np.stack([_curve(values[:, channel], cut) for channel, cut in enumerate(cuts)])
    ends = [values[cut, channel] for channel, cut in enumerate(cuts)]
    return Table(np.stack(np.meshgrid(*ends, indexing="ij"), axis=-1), curves)


def _turns(values: Line) -> list[int]:
    """Return the knots between which a line rises or falls throughout, first and last among them."""
    rises = np.diff(values)
    rises[np.abs(rises) <= 1e-13 * max(1.0, float(np.abs(values).max()))] = 0.0
    moving = np.flatnonzero(rises)
    turned = moving[1:][np.sign(rises[moving[1:]]) != np.sign(rises[moving[:-1]])]
    return [0, *turned.tolist(), len(values) - 1]


def _cut_into(cuts: list[int], steps: int) -> list[int]:
    """Return cuts that make as many steps, the widest ones halved."""
    cuts = list(cuts)
    while len(cuts) - 1 < steps:
        widest = int(np.argmax(np.diff(cuts)))
        cuts.insert(widest + 1, (cuts[widest] + cuts[widest + 1]) // 2)
    return cuts


def _curve(values: Line, cuts: list[int]) -> Line:
    """Return where in the lattice each knot lies, 0 … 1."""
    curve = np.empty(len(values))
    for step, (start, end) in enumerate(pairwise(cuts)):
        part, rise = values[start : end + 1], values[end] - values[start]
        share = (part - values[start]) / rise if rise != 0 else np.linspace(0.0, 1.0, len(part))
        curve[start : end + 1] = step + np.clip(share, 0.0, 1.0)
    return np.maximum.accumulate(curve / (len(cuts) - 1))
