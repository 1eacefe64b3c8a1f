"""Tables whose local stretch is too much or negative: limit the gradients, and find the table that has them.

Where a tetrahedron offends, its Jacobian is replaced by the nearest one that does not; the nodes then move so that
the table's differences come as near to the wanted ones as those of any table can (least squares: a Poisson equation
on the lattice, solved in its eigenbasis of cosines). What lies elsewhere keeps its slope; rounds
follow until nothing offends.

References:
    Fattal, Lischinski & Werman (2002), Gradient domain high dynamic range compression, for limiting gradients and
    integrating them.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.tables.cells import ORDERS, Floats, clipped_channels, curve_slopes, jacobians
from hueferry.tables.lattice_equations import integrate
from hueferry.tables.rules import Offences
from hueferry.tables.table import Table

_LEAST = 0.05
"""Smallest singular value of a mended Jacobian: clearly not folded, and far from flat."""

_MARGIN = 0.97
"""Aim this share of the cap, for the table cannot follow the wanted gradients exactly."""

_BEYOND = 1.5
"""Corrections go this much further than wanted, for neighbours that do not offend hold half of them back."""

_FOLLOW = 0.6
"""Share of its own Jacobian that a cell of an uneven ramp keeps in a round; the rest is that of the affine part."""


def mend(table: Table, offences: Offences, *, max_gain: float, calm: Floats) -> Table:
    """Return the table after one round.

    Args:
        table: the table.
        offences: what is wrong with it.
        max_gain: the gain cap.
        calm: (3, 3) Jacobian of the table's affine part, towards which uneven ramps are drawn.
    """
    cells = offences.cells
    index = np.argwhere(cells)
    _, most = curve_slopes(table)
    slopes = np.stack([most[axis, index[:, axis]] for axis in range(3)], axis=1)[:, None, :]
    lattice = jacobians(table, cells)
    true = lattice * slopes
    hidden = clipped_channels(table, cells)[..., None]
    wanted = _limited(np.where(hidden, 0.0, true), offences.steep[cells], max_gain * _MARGIN)
    wanted = np.where(hidden, true, wanted)
    folded = np.linalg.det(wanted) < _LEAST**3
    wanted[folded] = _unfolded(wanted[folded])
    uneven = offences.uneven[cells]
    wanted[:, uneven] = _FOLLOW * wanted[:, uneven] + (1 - _FOLLOW) * calm
    corrections = _BEYOND * (wanted / slopes - lattice) / (table.size - 1)
    moved = integrate(_edge_corrections(corrections, index, table.size))
    return Table(table.lattice + moved, table.curves)


def _limited(matrices: Floats, steep: NDArray[np.bool_], cap: float) -> Floats:
    """Return (6, m, 3, 3) matrices whose largest singular value is at most `cap` in the steep ones."""
    result = matrices.copy()
    chosen = matrices[:, steep]
    left, values, right = np.linalg.svd(chosen)
    result[:, steep] = (left * np.minimum(values, cap)[..., None, :]) @ right
    return result


def _unfolded(matrices: Floats) -> Floats:
    """Return (m, 3, 3) matrices with the smallest singular value turned positive, and none below the least."""
    left, values, right = np.linalg.svd(matrices)
    mirrored = np.linalg.det(left) * np.linalg.det(right) < 0
    left[mirrored, :, 2] *= -1
    return np.asarray((left * np.maximum(values, _LEAST)[..., None, :]) @ right)


def _edge_corrections(corrections: Floats, index: NDArray[np.int64], size: int) -> list[Floats]:
    """Average the corrections of all mended tetrahedra that share an edge: one array of edges an axis."""
    shapes = [tuple(size - 1 if axis == other else size for other in range(3)) for axis in range(3)]
    sums = [np.zeros((int(np.prod(shape)), 3)) for shape in shapes]
    counts = [np.zeros(len(total)) for total in sums]
    for row, order in enumerate(ORDERS):
        node = index.copy()
        for axis in order:
            flat = np.ravel_multi_index(tuple(node.T), shapes[axis])
            column = corrections[row, :, :, axis]
            counts[axis] += np.bincount(flat, minlength=len(counts[axis]))
            for channel in range(3):
                sums[axis][:, channel] += np.bincount(flat, column[:, channel], len(counts[axis]))
            node[:, axis] += 1
    return [
        (total / np.maximum(count, 1)[:, None]).reshape(*shape, 3)
        for total, count, shape in zip(sums, counts, shapes, strict=True)
    ]
