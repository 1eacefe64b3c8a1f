"""How far each tetrahedron of a table stretches colours: the singular values of its Jacobian."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.tables.cells import ORDERS, Cells, Floats, clipped_channels, curve_slopes, dot, jacobians
from hueferry.tables.table import Table


def gains(table: Table, cells: Cells) -> tuple[Floats, Floats]:
    """Return the largest and the smallest singular value of the Jacobian, (6, m) each, in the m `cells` (C order).

    A channel that lies beyond 0 … 1 in a whole tetrahedron is clipped after interpolation, so it counts as constant
    for the largest; it counts as it is for the smallest.
    """
    corner = _corners_of(table, cells)
    gentle, steep = _slopes_at(table, cells)
    found = np.empty((6, len(steep[0]))), np.empty((6, len(steep[0])))
    sides = _Sides.of(corner, steep, table.size - 1.0)
    softer = sides if np.array_equal(gentle, steep) else _Sides.of(corner, gentle, table.size - 1.0)
    beyond = np.asarray(((corner < 0) | (corner > 1)).any(axis=(0, 1)))
    for row, order in enumerate(ORDERS):
        found[0][row], found[1][row] = _singular(*sides.products(order))
        if softer is not sides:
            found[1][row] = _singular(*softer.products(order))[1]
    if beyond.any():
        found[0][:, beyond] = _gains_where_clipped(table, _only(cells, beyond))
    return found


def _gains_where_clipped(table: Table, cells: Cells) -> Floats:
    """Return (6, m) largest singular values, channels that are clipped all over a tetrahedron taken as constant."""
    shown = np.where(clipped_channels(table, cells)[..., None], 0.0, jacobians(table, cells))
    steep = _slopes_at(table, cells)[1]
    x, y, z = np.moveaxis(shown * steep.T[:, None, :], -1, 0)
    pairs = ((x, x), (y, y), (z, z), (x, y), (y, z), (x, z))
    return _singular(*(np.einsum("...i,...i->...", first, second) for first, second in pairs))[0]


def _slopes_at(table: Table, cells: Cells) -> tuple[Floats, Floats]:
    """Return the least and the greatest slope of the input curves in the m `cells`, (3, m) each."""
    index = np.nonzero(cells)
    least, most = curve_slopes(table)
    return np.stack([least[i, index[i]] for i in range(3)]), np.stack([most[i, index[i]] for i in range(3)])


def _only(cells: Cells, chosen: NDArray[np.bool_]) -> Cells:
    """Return those of the m `cells` (C order) that are chosen."""
    kept = np.zeros_like(cells)
    kept[cells] = chosen
    return kept


def _corners_of(table: Table, cells: Cells) -> Floats:
    """Return (8, 3, m) values at the corners of the m `cells`; bit i of the corner's number: high along channel i."""
    n = table.size
    base = np.ravel_multi_index(np.nonzero(cells), (n, n, n))
    steps = [sum(n ** (2 - axis) for axis in range(3) if number >> axis & 1) for number in range(8)]
    nodes = table.lattice.reshape(-1, 3)
    return np.stack([nodes[base + step].T for step in steps]).astype(np.float64)


@attrs.frozen(eq=False)
class _Sides:
    """The twelve sides of cells, (3, m) each, per whole code, by the axis they run along and the corner they begin at.

    Six tetrahedra share them, and most of their scalar products.
    """

    sides: dict[tuple[int, int], Floats]
    squares: dict[tuple[int, int], Floats]

    @classmethod
    def of(cls, corner: Floats, slopes: Floats, unit: float) -> _Sides:
        sides = {
            (axis, low): (corner[low | 1 << axis] - corner[low]) * (slopes[axis] * unit)
            for axis in range(3)
            for low in range(8)
            if not low >> axis & 1
        }
        return cls(sides, {key: dot(side, side) for key, side in sides.items()})

    def _walked(self, order: tuple[int, ...]) -> tuple[tuple[int, int], ...]:
        first, second, third = order
        return (first, 0), (second, 1 << first), (third, 1 << first | 1 << second)

    def norms(self, order: tuple[int, ...]) -> Floats:
        """Return the (m,) squared Frobenius norms of the tetrahedra that are walked in `order`."""
        return np.asarray(sum(self.squares[key] for key in self._walked(order)))

    def products(self, order: tuple[int, ...]) -> tuple[Floats, ...]:
        """Return the scalar products xx, yy, zz, xy, yz, xz of their columns x, y, z in walking order."""
        keys = self._walked(order)
        x, y, z = (self.sides[key] for key in keys)
        return (*(self.squares[key] for key in keys), dot(x, y), dot(y, z), dot(x, z))


def steeper(table: Table, cells: Cells, cap: float) -> NDArray[np.bool_]:
    """Return (m,), true for the `cells` (C order) whose largest gain in any tetrahedron exceeds `cap`."""
    sides = _Sides.of(_corners_of(table, cells), _slopes_at(table, cells)[1], table.size - 1.0)
    # The Frobenius norm is never less than the largest singular value, and much quicker.
    found = np.max([sides.norms(order) for order in ORDERS], axis=0) > cap * cap
    if found.any():
        found[found] = (gains(table, _only(cells, found))[0] > cap).any(axis=0)
    return np.asarray(found)


def _singular(xx: Floats, yy: Floats, zz: Floats, xy: Floats, yz: Floats, xz: Floats) -> tuple[Floats, Floats]:
    """Largest and smallest singular value of matrices of columns x, y, z from their scalar products, in closed form.

    References:
        Smith (1961), Eigenvalues of a symmetric 3 × 3 matrix, Communications of the ACM 4(4):168.
    """
    mean = (xx + yy + zz) / 3
    a, b, c = xx - mean, yy - mean, zz - mean
    spread = np.sqrt((a * a + b * b + c * c + 2 * (xy * xy + yz * yz + xz * xz)) / 6)
    determinant = a * (b * c - yz * yz) - xy * (xy * c - yz * xz) + xz * (xy * yz - b * xz)
    safe = np.where(spread > 0, spread, 1.0)
    angle = np.arccos(np.clip(determinant / (2 * safe**3), -1.0, 1.0)) / 3
    largest = mean + 2 * spread * np.cos(angle)
    smallest = mean + 2 * spread * np.cos(angle + 2 * np.pi / 3)
    return np.sqrt(np.maximum(largest, 0.0)), np.sqrt(np.maximum(smallest, 0.0))
