"""A table made safe: no fold, no gain beyond the cap, no uneven ramp; changed as little and as locally as that allows.

A few offending nodes are smoothed where they are. Else what the table does beyond its affine part is made stiffer, most
of all away from the occupied colours, and gradients that stretch too much are limited. What neither cures is drawn
towards the affine part, and that towards no change at all, which is always safe.
"""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.picture import Encoding
from hueferry.tables.cells import Occupied
from hueferry.tables.gradients import mend
from hueferry.tables.lattice_equations import smooth_through
from hueferry.tables.lookup import look_up
from hueferry.tables.rules import Rules
from hueferry.tables.smoothing import no_change, smooth
from hueferry.tables.table import Table

_LIMITING_ROUNDS = 8
_STIFFNESSES = (0.02, 0.5, 10.0, 200.0, 4000.0)
"""How much smoothness counts against nearness to the table where it is occupied, from least to most."""

_HALVINGS = 7
_TARGET = 0.995
"""Aim this much below the gain cap, so that float32 rounding cannot exceed it."""


@attrs.frozen
class Regularisation:
    """What was done to make a table safe.

    Attributes:
        smoothed: nodes whose displacement was smoothed.
        rounds: rounds of smoothing and of limiting gradients; 0 if there were none.
        stiffness: how much smoothness counted in the end, against nearness to the table.
        kept: share of the table kept in the blend towards its affine part; 1 means no blend.
        affine_kept: share of the affine part kept in its own blend towards no change; 1 means no blend.
        moved: mean shift of the occupied colours, in codes of 0 … 1.
    """

    smoothed: int = 0
    rounds: int = 0
    stiffness: float = 0.0
    kept: float = 1.0
    affine_kept: float = 1.0
    moved: float = 0.0

    @property
    def needed(self) -> bool:
        """Whether anything was changed."""
        return self.smoothed > 0 or self.rounds > 0 or self.kept < 1.0

    def sentences(self) -> tuple[str, ...]:
        """Say what was done in plain words; nothing if nothing was."""
        said = []
        if self.smoothed:
            said.append(f"smoothed {self.smoothed} nodes of the table to take out folds or steep places")
        if self.rounds:
            said.append("smoothed the table and limited its slope where it folded or stretched too much")
        if self.kept < 1.0:
            said.append(f"kept {100 * self.kept:.0f} % of what the table does beyond its affine part")
        if self.kept < 1.0 and self.affine_kept < 1.0:
            said.append(f"kept {100 * self.affine_kept:.0f} % of its affine part, for the gain cap")
        return tuple(said)


def make_safe(
    table: Table,
    *,
    occupied: Occupied,
    encoding: Encoding,
    max_gain: float,
    output: Encoding | None = None,
) -> tuple[Table, Regularisation]:
    """Return a table without folds, gains beyond the cap or uneven ramps, and what had to be done for it.

    A table that is safe already is returned as it is.

    Args:
        table: any table.
        occupied: the colours of the pictures it is for.
        encoding: what the table reads.
        max_gain: the gain cap on occupied cells, in code values; >= 1.
        output: what the table writes; None means `encoding`. No change is safe only where the two are the same.
    """
    written = encoding if output is None else output
    rules = Rules(occupied=occupied, encoding=encoding, output=written, max_gain=max_gain)
    if rules.obeyed(table):
        return table, Regularisation()
    strict = attrs.evolve(rules, max_gain=1 + (max_gain - 1) * _TARGET)
    result, smoothed = smooth(table, strict)
    how = Regularisation(smoothed=smoothed)
    if smoothed == 0 or not strict.obeyed(result):
        result, how = _by_limits(table, strict)
    moved = np.abs(look_up(result, occupied.codes) - look_up(table, occupied.codes)).max(axis=1)
    return result, attrs.evolve(how, moved=float(occupied.weights @ moved))


def _by_limits(table: Table, rules: Rules) -> tuple[Table, Regularisation]:
    affine, affine_kept = _safe_affine(table, rules)
    weights = rules.occupied.node_weights(table)
    rounds = 0
    for stiffness in _STIFFNESSES:
        beyond = table.lattice.astype(np.float64) - affine.lattice
        softened = affine.lattice + smooth_through(beyond, weights, stiffness=stiffness)
        limited, needed = _limited(Table(softened, table.curves), affine, rules)
        limited, smoothed = smooth(limited, rules)
        rounds += 1 + needed
        if rules.obeyed(limited):
            return limited, Regularisation(smoothed, rounds, stiffness, affine_kept=affine_kept)
    result, kept = _blend(affine, limited, rules)
    return result, Regularisation(rounds=rounds, stiffness=stiffness, kept=kept, affine_kept=affine_kept)


def _limited(table: Table, affine: Table, rules: Rules) -> tuple[Table, int]:
    """Limit gradients until nothing offends or the rounds are over; the mean of the occupied colours is kept."""
    occupied, calm = rules.occupied, _slope(affine)
    wanted = look_up(table, occupied.codes)
    current = table
    for done in range(_LIMITING_ROUNDS):
        offences = rules.offences(current)
        if not offences.any:
            return current, done
        current = mend(current, offences, max_gain=rules.max_gain, calm=calm)
        drift = occupied.weights @ (wanted - look_up(current, occupied.codes))
        current = Table(current.lattice + drift, table.curves)
    return current, _LIMITING_ROUNDS


def _slope(affine: Table) -> NDArray[np.float64]:
    """Return the (3, 3) Jacobian of a table that is affine."""
    lattice = affine.lattice.astype(np.float64)
    ends = [lattice[-1, 0, 0], lattice[0, -1, 0], lattice[0, 0, -1]]
    return np.stack([end - lattice[0, 0, 0] for end in ends], axis=1)


def _safe_affine(table: Table, rules: Rules) -> tuple[Table, float]:
    """Fit the affine part on the occupied colours, and draw it towards no change until it is safe by itself."""
    codes, weights = rules.occupied.codes, rules.occupied.weights
    rest = no_change(table)
    columns = np.concatenate([codes, np.ones((len(codes), 1))], axis=1)
    scale = np.sqrt(weights)[:, None]
    # A ridge towards no change decides the directions in which the colours do not vary.
    ridge = np.diag([1e-2, 1e-2, 1e-2, 1e-5])
    shift = look_up(table, codes) - codes
    solved = np.linalg.lstsq(
        np.concatenate([columns * scale, ridge]), np.concatenate([shift * scale, np.zeros((4, 3))]), rcond=None
    )[0]
    affine = Table(rest + rest @ solved[:3] + solved[3], table.curves)
    return _blend(Table(rest, table.curves), affine, rules)


def _blend(safe: Table, wanted: Table, rules: Rules) -> tuple[Table, float]:
    """Go from a safe table towards another as far as the rules allow, to 1 part in 128."""
    if rules.obeyed(wanted):
        return wanted, 1.0
    kept, best, low, high = 0.0, safe, 0.0, 1.0
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        candidate = _mixed(safe, wanted, middle)
        if rules.obeyed(candidate):
            low, kept, best = middle, middle, candidate
        else:
            high = middle
    return best, kept


def _mixed(first: Table, second: Table, share: float) -> Table:
    if share == 1.0:
        return second
    return Table((1 - share) * first.lattice.astype(np.float64) + share * second.lattice, second.curves)
