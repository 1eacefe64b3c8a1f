"""The tetrahedra of a table: which ones there are, which are occupied, and how each turns and stretches colours.

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

_SLAB = 4
"""Planes of cells at a time: what is computed on the way stays in the cache."""


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


def determinants(lattice: NDArray[np.float32]) -> Floats:
    """Return (6, n − 1, n − 1, n − 1) Jacobian determinants of the lattice, before input curves.

    A value within float32 rounding of zero is given as 0: such a tetrahedron is flat, and reverses nothing.
    """
    unit = float(lattice.shape[0] - 1)
    return determinants_within(lattice, unit)


def determinants_within(part: NDArray[np.float32], unit: float) -> Floats:
    """Return the determinants in a part of a lattice: (6, …) for (…, 3) nodes that lie 1 / `unit` apart."""
    shape = tuple(length - 1 for length in part.shape[:3])
    found = np.empty((6, *shape))
    rounding = 2.0**-23 * max(1.0, float(np.abs(part).max())) * unit
    for start in range(0, shape[0], _SLAB):
        stop = min(start + _SLAB, shape[0])
        _fill_determinants(part[start : stop + 1], unit, rounding, found[:, start:stop])
    return found


def _fill_determinants(part: NDArray[np.float32], unit: float, rounding: float, found: Floats) -> None:
    edges = _edges(part, unit)
    for row, order in enumerate(ORDERS):
        a, b, c = _walk(edges, order)
        sign = 1.0 if order in ((0, 1, 2), (1, 2, 0), (2, 0, 1)) else -1.0
        value = sign * _triple(a, b, c)
        doubtful = value < 1e-3
        if doubtful.any():
            lengths = [np.sqrt((side[:, doubtful] ** 2).sum(axis=0)) for side in (a, b, c)]
            slack = rounding * (lengths[0] * lengths[1] + lengths[1] * lengths[2] + lengths[0] * lengths[2])
            kept = value[doubtful]
            value[doubtful] = np.where(np.abs(kept) <= slack, 0.0, kept)
        found[row] = value


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


def gains(table: Table, cells: Cells) -> tuple[Floats, Floats]:
    """Return the largest and the smallest singular value of the Jacobian, (6, m) each, in the m `cells` (C order).

    A channel that lies beyond 0 … 1 in a whole tetrahedron is clipped after interpolation, so it counts as constant
    for the largest; it counts as it is for the smallest.
    """
    lattice = jacobians(table, cells)
    shown = np.where(clipped_channels(table, cells)[..., None], 0.0, lattice)
    least, most = curve_slopes(table)
    index = np.argwhere(cells)
    steep = np.stack([most[axis, index[:, axis]] for axis in range(3)], axis=1)
    gentle = np.stack([least[axis, index[:, axis]] for axis in range(3)], axis=1)
    return _singular(shown * steep[:, None, :])[0], _singular(lattice * gentle[:, None, :])[1]


def steeper(table: Table, cells: Cells, cap: float) -> NDArray[np.bool_]:
    """Return (m,), true for the `cells` (C order) whose largest gain in any tetrahedron exceeds `cap`."""
    _, most = curve_slopes(table)
    index = np.argwhere(cells)
    steep = np.stack([most[axis, index[:, axis]] for axis in range(3)], axis=1)
    matrices = jacobians(table, cells) * steep[:, None, :]
    # The Frobenius norm is never less than the largest singular value, and much quicker.
    found = ((matrices * matrices).sum(axis=(-2, -1)) > cap * cap).any(axis=0)
    if found.any():
        doubtful = np.zeros_like(cells)
        doubtful[tuple(index[found].T)] = True
        found[found] = (gains(table, doubtful)[0] > cap).any(axis=0)
    return np.asarray(found)


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


def _edges(lattice: NDArray[np.float32], unit: float) -> tuple[Floats, Floats, Floats]:
    planes = np.ascontiguousarray(np.moveaxis(lattice, -1, 0), dtype=np.float64) * unit
    return np.diff(planes, axis=1), np.diff(planes, axis=2), np.diff(planes, axis=3)


def _walk(edges: tuple[Floats, Floats, Floats], order: tuple[int, ...]) -> list[Floats]:
    """The three edges from the low to the high corner of every cell, in walking order: (3 outputs, n−1, n−1, n−1)."""
    passed: set[int] = set()
    sides = []
    for axis in order:
        where = tuple(
            slice(None) if other == axis else (slice(1, None) if other in passed else slice(None, -1))
            for other in range(3)
        )
        sides.append(edges[axis][(slice(None), *where)])
        passed.add(axis)
    return sides


def _triple(a: Floats, b: Floats, c: Floats) -> Floats:
    return np.asarray(
        a[0] * (b[1] * c[2] - b[2] * c[1]) + a[1] * (b[2] * c[0] - b[0] * c[2]) + a[2] * (b[0] * c[1] - b[1] * c[0])
    )


def _singular(matrices: Floats) -> tuple[Floats, Floats]:
    """Largest and smallest singular value of (…, 3, 3) matrices, by the closed form for symmetric 3 × 3 matrices.

    References:
        Smith (1961), Eigenvalues of a symmetric 3 × 3 matrix, Communications of the ACM 4(4):168.
    """
    x, y, z = matrices[..., 0], matrices[..., 1], matrices[..., 2]
    a, b, c = (x * x).sum(-1), (y * y).sum(-1), (z * z).sum(-1)
    d, e, f = (x * y).sum(-1), (y * z).sum(-1), (x * z).sum(-1)
    mean = (a + b + c) / 3
    a, b, c = a - mean, b - mean, c - mean
    spread = np.sqrt((a * a + b * b + c * c + 2 * (d * d + e * e + f * f)) / 6)
    determinant = a * (b * c - e * e) - d * (d * c - e * f) + f * (d * e - b * f)
    safe = np.where(spread > 0, spread, 1.0)
    angle = np.arccos(np.clip(determinant / (2 * safe**3), -1.0, 1.0)) / 3
    largest = mean + 2 * spread * np.cos(angle)
    smallest = mean + 2 * spread * np.cos(angle + 2 * np.pi / 3)
    return np.sqrt(np.maximum(largest, 0.0)), np.sqrt(np.maximum(smallest, 0.0))
