"""The tetrahedra of a table: which ones there are, which are occupied, and the Jacobian in each.

In every tetrahedron the table is affine, so a Jacobian from node differences is exact, not an estimate. With input
curves the Jacobian is that of the lattice times the curves' slopes in the cell; where a slope varies within a cell, the
steepest gives a gain that is not exceeded and the least a gain that is not undercut.
"""

from __future__ import annotations

from itertools import permutations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Weights, read_only
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding
from hueferry.tables.lookup import lattice_positions, node_codes
from hueferry.tables.table import Table

Floats = NDArray[np.float64]
Cells = NDArray[np.bool_]
"""(n − 1, n − 1, n − 1), true for the cells that are meant."""

ORDERS = tuple(permutations(range(3)))
"""The six tetrahedra of a cell, each by the order in which its channels are walked from the low to the high corner."""

_UNSEEN, _BESIDE = 1e-3, 0.1


@attrs.frozen(eq=False)
class Occupied:
    """The codes that pictures really hold, each with its share.

    Attributes:
        codes: (m, 3) in the encoding that the table reads, 0 … 1.
        weights: (m,) shares that sum to 1.
    """

    codes: Codes = attrs.field(converter=read_only)
    weights: Weights = attrs.field(converter=read_only)

    @classmethod
    def of_palette(cls, palette: Palette, encoding: Encoding) -> Occupied:
        """Take the colours of an Oklab palette, as codes."""
        from hueferry.colour.spaces import oklab_to_xyz

        return cls(np.clip(encoding.from_xyz(oklab_to_xyz(palette.colours)), 0.0, 1.0), palette.weights)

    def cells(self, table: Table, *, margin: int = 1) -> Cells:
        """Return the cells with a colour in them or, with a margin, within that many cells of one."""
        size = table.size
        found = np.zeros((size - 1,) * 3, dtype=bool)
        cell = np.minimum(lattice_positions(table, self.codes).astype(np.int64), size - 2)
        found[tuple(cell.T)] = True
        return widened(found, margin)

    def node_weights(self, table: Table) -> Floats:
        """Return (n, n, n) how much each node matters: 1 in occupied cells, little beside them, hardly elsewhere."""
        weights = np.full(table.lattice.shape[:3], _UNSEEN)
        weights[corners(self.cells(table, margin=1))] = _BESIDE
        weights[corners(self.cells(table, margin=0))] = 1.0
        return weights


def corners(cells: Cells) -> NDArray[np.bool_]:
    """Return the (n, n, n) nodes at the corners of cells."""
    nodes = np.zeros(tuple(n + 1 for n in cells.shape), dtype=bool)
    for corner in np.ndindex(2, 2, 2):
        nodes[tuple(slice(c, c + n) for c, n in zip(corner, cells.shape, strict=True))] |= cells
    return nodes


def widened(cells: Cells, margin: int) -> Cells:
    """Return cells and everything within `margin` of them along the axes and diagonals."""
    wide = cells.copy()
    for axis in range(3):
        line = np.moveaxis(wide, axis, 0)
        source = line.copy()
        for step in range(1, min(margin, len(line) - 1) + 1):
            line[step:] |= source[:-step]
            line[:-step] |= source[step:]
    return wide


def jacobians(table: Table, cells: Cells) -> Floats:
    """Return (6, m, 3, 3) Jacobians of the lattice in the m `cells` (C order), [..., output, input], before curves."""
    base = np.argwhere(cells)
    lattice = table.lattice.astype(np.float64)
    found = np.empty((6, len(base), 3, 3))
    for row, order in enumerate(ORDERS):
        node = base.copy()
        value = lattice[tuple(node.T)]
        for axis in order:
            node[:, axis] += 1
            ahead = lattice[tuple(node.T)]
            found[row, :, :, axis] = (ahead - value) * (table.size - 1)
            value = ahead
    return found


def clipped_channels(table: Table, cells: Cells) -> NDArray[np.bool_]:
    """Return (6, m, 3), true where a channel lies below 0 or above 1 at all four corners of a tetrahedron."""
    base = np.argwhere(cells)
    low, high = table.lattice < 0, table.lattice > 1
    found = np.empty((6, len(base), 3), dtype=bool)
    for row, order in enumerate(ORDERS):
        node = base.copy()
        below, above = low[tuple(node.T)], high[tuple(node.T)]
        for axis in order:
            node[:, axis] += 1
            below, above = below & low[tuple(node.T)], above & high[tuple(node.T)]
        found[row] = below | above
    return found


def curve_slopes(table: Table) -> tuple[Floats, Floats]:
    """Return the least and the greatest slope of the input curves within each step between nodes, (3, n − 1) each."""
    shape = (3, table.size - 1)
    if table.curves is None:
        return np.ones(shape), np.ones(shape)
    curves = table.curves.astype(np.float64)
    slopes = np.diff(curves, axis=1) * (curves.shape[1] - 1)
    least, most = np.full(shape, np.inf), np.zeros(shape)
    # Rounding may put a knot a hair beyond its node; a segment belongs only to the cells it truly reaches into.
    hair = 1e-6
    first = np.clip(np.floor(curves[:, :-1] * (table.size - 1) + hair), 0, table.size - 2).astype(int)
    last = np.clip(np.ceil(curves[:, 1:] * (table.size - 1) - hair) - 1, 0, table.size - 2).astype(int)
    for axis in range(3):
        for reach in range(int((last[axis] - first[axis]).max()) + 1):
            cell = np.minimum(first[axis] + reach, last[axis])
            np.minimum.at(least[axis], cell, slopes[axis])
            np.maximum.at(most[axis], cell, slopes[axis])
    chords = 1 / ((table.size - 1) * np.diff(node_codes(table.size, table.curves), axis=1))
    straight = most - least <= 2.0**-22 * curves.shape[1]  # nothing but the rounding of float32 knots
    return np.where(straight, chords, least), np.where(straight, chords, most)


def dot(a: Floats, b: Floats) -> Floats:
    """Return the (…) scalar products of (3, …) vectors."""
    return np.asarray(a[0] * b[0] + a[1] * b[1] + a[2] * b[2])
