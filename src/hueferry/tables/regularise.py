"""A table made safe: no fold, no gain beyond the cap, no uneven ramp; changed as little and as locally as that allows.

Displacements are smoothed around the offending nodes first, in a growing neighbourhood. What that does not cure is
drawn towards the affine part of the table, and at last towards no change at all, which is always safe.
"""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.picture import Encoding
from hueferry.tables.cells import Cells, Occupied, determinants_within, gains, widened
from hueferry.tables.lookup import lattice_positions, look_up, node_codes
from hueferry.tables.ramps import uneven_codes
from hueferry.tables.table import Table

Nodes = NDArray[np.float64]
"""(n, n, n, 3) displacements or codes at the nodes."""

Box = tuple[slice, slice, slice]

EVERYWHERE: Box = (slice(None), slice(None), slice(None))

_ROUNDS = 10
_WIDESPREAD = 0.25
"""Share of occupied cells beyond which a fault is the map's own and smoothing would only move it about."""

_HALVINGS = 7
_TARGET = 0.995
"""Aim this much below the gain cap, so that float32 rounding cannot exceed it."""


@attrs.frozen
class Regularisation:
    """What was done to make a table safe.

    Attributes:
        smoothed: nodes whose displacement was smoothed.
        kept: share of the table kept in the blend towards its affine part; 1 means no blend.
        affine_kept: share of the affine part kept in the blend towards no change; 1 means no blend.
        moved: mean shift of the occupied colours, in codes of 0 … 1.
    """

    smoothed: int = 0
    kept: float = 1.0
    affine_kept: float = 1.0
    moved: float = 0.0

    @property
    def needed(self) -> bool:
        """Whether anything was changed."""
        return self.smoothed > 0 or self.kept < 1.0

    def sentences(self) -> tuple[str, ...]:
        """Say what was done in plain words; nothing if nothing was."""
        said = []
        if self.smoothed:
            said.append(f"smoothed {self.smoothed} nodes of the table to take out folds or steep places")
        if self.kept < 1.0:
            said.append(f"kept {100 * self.kept:.0f} % of what the map does beyond its affine part, for the gain cap")
        if self.affine_kept < 1.0:
            said.append(f"kept {100 * self.affine_kept:.0f} % of the affine part of the map, for the gain cap")
        return tuple(said)


@attrs.frozen(eq=False, kw_only=True)
class _Rules:
    """What a safe table must obey."""

    occupied: Occupied
    encoding: Encoding
    output: Encoding
    max_gain: float

    def offending(self, table: Table, within: Box = EVERYWHERE) -> Cells:
        """Return cells `within` a box that fold, stretch too much where occupied, or make a ramp uneven."""
        found = np.zeros((table.size - 1,) * 3, dtype=bool)
        nodes = tuple(slice(side.start, None if side.stop is None else side.stop + 1) for side in within)
        found[within] = (determinants_within(table.lattice[nodes], table.size - 1.0) < 0).any(axis=0)
        cells = np.zeros_like(found)
        cells[within] = self.occupied.cells(table)[within]
        found[cells] |= (gains(table, cells)[0] > self.max_gain).any(axis=0)
        uneven = uneven_codes(table, self.encoding, self.output)
        index = np.minimum(lattice_positions(table, uneven).astype(np.int64), table.size - 2)
        found[tuple(index.T)] = True
        return np.asarray(found)

    def obeyed(self, table: Table) -> bool:
        return not self.offending(table).any()


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
    rules = _Rules(occupied=occupied, encoding=encoding, output=written, max_gain=max_gain)
    if rules.obeyed(table):
        return table, Regularisation()
    strict = attrs.evolve(rules, max_gain=1 + (max_gain - 1) * _TARGET)
    smooth, touched = _smoothed(table, strict)
    shared = 1.0
    affine_kept = 1.0
    result = smooth
    if not strict.obeyed(smooth):
        affine, affine_kept = _safe_affine(smooth, strict)
        result, shared = _blend(affine, smooth, strict)
    moved = np.abs(look_up(result, occupied.codes) - look_up(table, occupied.codes)).max(axis=1)
    return result, Regularisation(touched, shared, affine_kept, float(occupied.weights @ moved))


def _smoothed(table: Table, rules: _Rules) -> tuple[Table, int]:
    """Smooth displacements around offending nodes until none offends or the rounds are over."""
    rest = _no_change(table)
    shift = table.lattice.astype(np.float64) - rest
    touched = np.zeros(table.lattice.shape[:3], dtype=bool)
    cells = rules.occupied.cells(table)
    bad = rules.offending(table)
    if (bad & cells).sum() > _WIDESPREAD * cells.sum():
        return table, 0
    current = table
    for number in range(_ROUNDS):
        touched |= widened(_corners(bad), number // 2)
        box = _box_around(touched)
        for _ in range(1 + number):
            shift[box] = np.where(touched[box][..., None], _averaged(shift[box]), shift[box])
        current = Table(rest + shift, table.curves)
        bad = rules.offending(current, box)  # every cell that offends lies in the box
        if not bad.any():
            break
    return current, int(touched.sum())


def _box_around(nodes: NDArray[np.bool_]) -> Box:
    """Return the nodes' bounding box with a margin of one where there is room: slices of nodes, and of their cells."""
    sides = []
    for axis in range(3):
        found = np.flatnonzero(nodes.any(axis=tuple(other for other in range(3) if other != axis)))
        sides.append(slice(max(int(found[0]) - 1, 0), min(int(found[-1]) + 2, nodes.shape[axis])))
    return sides[0], sides[1], sides[2]


def _corners(cells: Cells) -> NDArray[np.bool_]:
    nodes = np.zeros(tuple(n + 1 for n in cells.shape), dtype=bool)
    for corner in np.ndindex(2, 2, 2):
        nodes[tuple(slice(c, c + n) for c, n in zip(corner, cells.shape, strict=True))] |= cells
    return nodes


def _averaged(shift: Nodes) -> Nodes:
    """Average every node with its neighbours, with weights 1 2 1 along each axis and edges repeated."""
    for axis in range(3):
        padded = np.concatenate([shift.take([0], axis), shift, shift.take([-1], axis)], axis)
        line = np.moveaxis(padded, axis, 0)
        shift = np.moveaxis((line[:-2] + 2 * line[1:-1] + line[2:]) / 4, 0, axis)
    return shift


def _no_change(table: Table) -> Nodes:
    red, green, blue = node_codes(table.size, table.curves)
    return np.stack(np.meshgrid(red, green, blue, indexing="ij"), axis=-1)


def _safe_affine(table: Table, rules: _Rules) -> tuple[Table, float]:
    """Fit the affine part on the occupied colours, and draw it towards no change until it is safe by itself."""
    codes, weights = rules.occupied.codes, rules.occupied.weights
    rest = _no_change(table)
    columns = np.concatenate([codes, np.ones((len(codes), 1))], axis=1)
    scale = np.sqrt(weights)[:, None]
    # A ridge towards no change decides the directions in which the colours do not vary.
    ridge = 1e-2 * np.eye(4)[:, :] * np.array([1.0, 1.0, 1.0, 1e-3])
    shift = look_up(table, codes) - codes
    solved = np.linalg.lstsq(
        np.concatenate([columns * scale, ridge]), np.concatenate([shift * scale, np.zeros((4, 3))]), rcond=None
    )[0]
    affine = Table(rest + rest @ solved[:3] + solved[3], table.curves)
    return _blend(Table(rest, table.curves), affine, rules)


def _blend(safe: Table, wanted: Table, rules: _Rules) -> tuple[Table, float]:
    """Go from a safe table towards another as far as the rules allow, to 1 part in 128."""
    if rules.obeyed(wanted):
        return wanted, 1.0
    kept, best, low, high = 0.0, safe, 0.0, 1.0
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        lattice = (1 - middle) * safe.lattice.astype(np.float64) + middle * wanted.lattice
        candidate = Table(lattice, wanted.curves)
        if rules.obeyed(candidate):
            low, kept, best = middle, middle, candidate
        else:
            high = middle
    return best, kept
