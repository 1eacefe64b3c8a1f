"""How a table is read, in plain NumPy and double precision: the definition that the fast engine must meet."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.tables.table import Table

_BLOCK = 1 << 17


def look_up(table: Table, codes: Codes) -> Codes:
    """Read a table by tetrahedral interpolation; codes beyond 0 … 1 are clamped first, results are not clipped.

    Within a cell with fractions d, sorted so that d_i >= d_j >= d_k, the value is
    V000 + d_i (V_i − V000) + d_j (V_ij − V_i) + d_k (V111 − V_ij).

    Args:
        table: the table.
        codes: (n, 3), or any shape that ends in 3.

    Returns:
        Output codes of the same shape, float64.

    References:
        Kasson, Nin, Plouffe & Hafner (1995), Performing color space conversions with three-dimensional linear
        interpolation; Academy S-2014-006, Common LUT Format, appendix A (with >= on ties).
    """
    codes = np.asarray(codes, dtype=np.float64)
    flat = codes.reshape(-1, 3)
    result = np.empty_like(flat)
    lattice = table.lattice.astype(np.float64).reshape(-1, 3)
    for start in range(0, len(flat), _BLOCK):
        block = slice(start, start + _BLOCK)
        result[block] = tetrahedral(lattice, table.size, lattice_positions(table, flat[block]))
    return result.reshape(codes.shape)


def lattice_positions(table: Table, codes: Codes) -> Codes:
    """Return where (n, 3) codes fall in the lattice, in steps between nodes: 0 … size − 1, after the input curves."""
    positions = np.clip(codes, 0.0, 1.0)
    if table.curves is not None:
        knots = np.linspace(0.0, 1.0, table.curves.shape[1])
        positions = np.stack(
            [np.interp(positions[:, i], knots, table.curves[i].astype(np.float64)) for i in range(3)], axis=1
        )
    return np.asarray(positions * (table.size - 1))


def node_codes(table_size: int, curves: NDArray[np.float32] | None) -> NDArray[np.float64]:
    """Return the (3, n) input codes at which the nodes along each channel lie."""
    even = np.linspace(0.0, 1.0, table_size)
    if curves is None:
        return np.stack([even] * 3)
    knots = np.linspace(0.0, 1.0, curves.shape[1])
    return np.stack([np.interp(even, curve.astype(np.float64), knots) for curve in curves])


def tetrahedral(lattice: Codes, size: int, positions: Codes) -> Codes:
    """Read a lattice by tetrahedral interpolation.

    Args:
        lattice: (size³, 3) values, the third channel changing fastest.
        size: nodes along each axis.
        positions: (n, 3), in steps between nodes, 0 … size − 1; beyond, the outermost tetrahedra go on.
    """
    cell = np.clip(positions.astype(np.int64), 0, size - 2)
    fractions = positions - cell
    strides = np.array([size * size, size, 1])
    # A stable sort of the negated fractions leaves ties in channel order: any order gives the same value on a tie.
    order = np.argsort(-fractions, axis=1, kind="stable")
    node = cell @ strides
    value = lattice[node]
    result = value.copy()
    for rank in range(3):
        axis = order[:, rank]
        node = node + strides[axis]
        ahead = lattice[node]
        result += np.take_along_axis(fractions, axis[:, None], axis=1) * (ahead - value)
        value = ahead
    return np.asarray(result)
