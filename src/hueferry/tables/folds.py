"""Which tetrahedra of a table reverse orientation."""

from __future__ import annotations

from functools import lru_cache

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.tables.cells import ORDERS, Cells, Floats, dot
from hueferry.tables.table import Table
from hueferry.threads import each

_ROW = {order[:2]: row for row, order in enumerate(ORDERS)}
"""Which tetrahedron is walked along two given channels first."""

_SLAB = 4
"""Planes of cells at a time: what is computed on the way stays in the cache."""


def determinants(lattice: NDArray[np.float32]) -> Floats:
    """Return (6, n − 1, n − 1, n − 1) Jacobian determinants of the lattice, before input curves.

    A value within float32 rounding of zero is given as 0: such a tetrahedron is flat, and reverses nothing.
    """
    unit = float(lattice.shape[0] - 1)
    return determinants_within(lattice, unit)


@attrs.frozen(eq=False)
class Orientation:
    """How the tetrahedra of a table are turned.

    Attributes:
        folded: cells with a tetrahedron of negative determinant.
        tetrahedra: how many there are.
        folds: how many have a negative determinant.
        flat: how many have a determinant of zero within float32 rounding.
    """

    folded: Cells
    tetrahedra: int
    folds: int
    flat: int


@lru_cache(maxsize=2)
def orientation(table: Table) -> Orientation:
    """Return how the tetrahedra of a table are turned; found once for the table that is made safe and certified."""
    found = determinants(table.lattice)
    negative = found < 0
    return Orientation(
        folded=np.asarray(negative.any(axis=0)),
        tetrahedra=found.size,
        folds=int(np.count_nonzero(negative)),
        flat=int(np.count_nonzero(found == 0)),
    )


def determinants_within(part: NDArray[np.float32], unit: float) -> Floats:
    """Return the determinants in a part of a lattice: (6, …) for (…, 3) nodes that lie 1 / `unit` apart."""
    shape = tuple(length - 1 for length in part.shape[:3])
    found = np.empty((6, *shape))
    rounding = 2.0**-23 * max(1.0, float(np.abs(part).max())) * unit

    def fill(start: int) -> None:
        stop = min(start + _SLAB, shape[0])
        _fill_determinants(part[start : stop + 1], unit, rounding, found[:, start:stop])

    each(fill, range(0, shape[0], _SLAB))
    return found


def _fill_determinants(part: NDArray[np.float32], unit: float, rounding: float, found: Floats) -> None:
    """Fill in u · (w × d): u, w and d lead from a cell's low corner to the next three that a tetrahedron has."""
    planes = np.ascontiguousarray(np.moveaxis(part, -1, 0), dtype=np.float64) * unit
    low = planes[_corner(())]
    far = planes[_corner((0, 1, 2))] - low
    near = [planes[_corner((axis,))] - low for axis in range(3)]
    for face in ((0, 1), (1, 2), (2, 0)):
        middle = planes[_corner(face)] - low
        normal = _cross(middle, far)
        for first, sign in zip(face, (1.0, -1.0), strict=True):
            value = sign * dot(near[first], normal)
            doubtful = value < 1e-3
            if doubtful.any():
                sides = [side[:, doubtful] for side in (near[first], middle, far)]
                slack = rounding * _faces(sides[0], sides[1] - sides[0], sides[2] - sides[1])
                kept = value[doubtful]
                value[doubtful] = np.where(np.abs(kept) <= slack, 0.0, kept)
            found[_ROW[(first, *(axis for axis in face if axis != first))]] = value


def _corner(raised: tuple[int, ...]) -> tuple[slice, ...]:
    """Index of every cell's corner that is high along the axes `raised`, in planes (channel, …)."""
    return (slice(None), *(slice(1, None) if axis in raised else slice(None, -1) for axis in range(3)))


def _cross(a: Floats, b: Floats) -> Floats:
    return np.stack([a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]])


def _faces(a: Floats, b: Floats, c: Floats) -> Floats:
    """Return |a| |b| + |b| |c| + |a| |c|."""
    lengths = [np.sqrt(dot(side, side)) for side in (a, b, c)]
    return np.asarray(lengths[0] * lengths[1] + lengths[1] * lengths[2] + lengths[0] * lengths[2])
