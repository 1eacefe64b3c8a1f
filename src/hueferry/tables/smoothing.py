"""A few spoiled nodes mended where they are, by smoothing the displacements around them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.tables.cells import corners, widened
from hueferry.tables.lookup import node_codes
from hueferry.tables.rules import Box, Rules
from hueferry.tables.table import Table

Nodes = NDArray[np.float64]
"""(n, n, n, 3) displacements or codes at the nodes."""

_ROUNDS = 6
_FEW = 0.02
"""Share of the cells beyond which smoothing would only move a fault about."""


def smooth(table: Table, rules: Rules) -> tuple[Table, int]:
    """Smooth around a few offending nodes until nothing offends or the rounds are over.

    Returns:
        The table, and how many nodes were smoothed; the table as it was and 0 where offences are none or not few.
    """
    bad = rules.offences(table).cells
    if not bad.any():
        return table, 0
    cells = rules.occupied.cells(table)
    if (bad & cells).sum() > _FEW * cells.sum() or bad.sum() > _FEW * bad.size:
        return table, 0
    rest = no_change(table)
    shift = table.lattice.astype(np.float64) - rest
    touched = np.zeros(table.lattice.shape[:3], dtype=bool)
    current = table
    for number in range(_ROUNDS):
        touched |= widened(corners(bad), number // 2)
        box = _box_around(touched)
        for _ in range(1 + number):
            shift[box] = np.where(touched[box][..., None], _averaged(shift[box]), shift[box])
        current = Table(rest + shift, table.curves)
        bad = rules.offences(current, box).cells  # every cell that offends lies in the box
        if not bad.any():
            break
    return current, int(touched.sum())


def no_change(table: Table) -> Nodes:
    """Return the codes at which the nodes lie: the lattice that changes nothing."""
    red, green, blue = node_codes(table.size, table.curves)
    return np.stack(np.meshgrid(red, green, blue, indexing="ij"), axis=-1)


def _box_around(nodes: NDArray[np.bool_]) -> Box:
    """Return the nodes' bounding box with a margin of one where there is room: slices of nodes, and of their cells."""
    sides = []
    for axis in range(3):
        found = np.flatnonzero(nodes.any(axis=tuple(other for other in range(3) if other != axis)))
        sides.append(slice(max(int(found[0]) - 1, 0), min(int(found[-1]) + 2, nodes.shape[axis])))
    return sides[0], sides[1], sides[2]


def _averaged(shift: Nodes) -> Nodes:
    """Average every node with its neighbours, with weights 1 2 1 along each axis and edges repeated."""
    for axis in range(3):
        padded = np.concatenate([shift.take([0], axis), shift, shift.take([-1], axis)], axis)
        line = np.moveaxis(padded, axis, 0)
        shift = np.moveaxis((line[:-2] + 2 * line[1:-1] + line[2:]) / 4, 0, axis)
    return shift
