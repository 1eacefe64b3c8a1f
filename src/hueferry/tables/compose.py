"""Tables one after another as one table, and a table backwards, each with its distance from the real thing."""

from __future__ import annotations

from collections.abc import Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes
from hueferry.errors import InputError
from hueferry.tables.express import express, express_function, lattice_operation
from hueferry.tables.folds import determinants
from hueferry.tables.lookup import look_up, tetrahedral
from hueferry.tables.misfit import Misfit, misfit, probes
from hueferry.tables.process import ProcessList
from hueferry.tables.table import Table

Floats = NDArray[np.float64]

_SIZES = (33, 65)
_STEPS = 40
_FOUND = 1e-9
_HAIR = 1e-7
_BEYOND = 0.5
"""How far beyond 0 … 1 codes are looked for."""

_BLOCK = 1 << 16


def compose(tables: Sequence[Table]) -> tuple[Table, Misfit]:
    """Return the table that does what several do one after another, and how far it is from them.

    Between two tables codes are clamped to 0 … 1, as they are when a picture is written and read again.

    Args:
        tables: the first is applied first; at least one.

    Raises:
        InputError: there is none, or no table comes near enough.
    """
    if not tables:
        raise InputError("there is no table to put together; give at least one")
    operations = tuple(operation for table in tables for operation in lattice_operation(table))
    return express(ProcessList(operations, tuple(type(operation).__name__ for operation in operations)))


@attrs.frozen(eq=False)
class Inverse:
    """A table backwards.

    Attributes:
        table: results to codes; for results that the table never gives, codes beyond 0 … 1 that go on as straight as
            the nearest ones, so that nothing bends at the border.
        misfit: how far codes are from themselves, sent through the table and back.
        reached: share of all colours of 0 … 1 that the table gives at all.
    """

    table: Table
    misfit: Misfit
    reached: float


def invert(table: Table) -> Inverse:
    """Return a table backwards.

    Raises:
        InputError: it folds or is flat somewhere, so that several codes share a result; or no table comes near enough.
    """
    _check_one_to_one(table)

    def backwards(results: Codes) -> Codes:
        return solve(table, results)

    found, _ = express_function(backwards, sizes=_SIZES)
    colours = probes()
    results = look_up(table, colours)
    inside = ((results >= 0) & (results <= 1)).all(axis=1)
    if not inside.any():
        raise InputError("this table gives no colour of 0 … 1, so there is nothing to undo")
    there = results[inside]

    def origin(_: Codes) -> Codes:
        return colours[inside]

    codes = solve(table, np.random.default_rng(1).uniform(0.0, 1.0, (20_000, 3)))
    reached = ((codes >= -_HAIR) & (codes <= 1 + _HAIR)).all(axis=1)
    return Inverse(found, misfit(found, origin, there), float(reached.mean()))


def _check_one_to_one(table: Table) -> None:
    determinant = determinants(table.lattice)
    folds, flat = int((determinant < 0).sum()), int((determinant == 0).sum())
    if folds or flat:
        raise InputError(
            f"a table with {folds} folds and {flat} flat tetrahedra cannot be undone: several codes share a result"
        )
    if table.curves is not None and (np.diff(table.curves, axis=1) <= 0).any():
        raise InputError("a table whose curves stand still somewhere cannot be undone: several codes share a result")


def solve(table: Table, results: Codes) -> Codes:
    """Return the (n, 3) codes that a table sends to (n, 3) results.

    The table is affine in each tetrahedron, so a Newton step from the right one lands exactly. Steps that would go
    further away are halved; the first starts at the node whose result is nearest. For results that the table never
    gives, tetrahedra at its sides are taken to go on beyond 0 … 1.
    """
    from scipy.spatial import cKDTree

    flat = table.lattice.astype(np.float64).reshape(-1, 3)
    tree = cKDTree(flat)
    found = np.empty_like(results)
    for start in range(0, len(results), _BLOCK):
        block = slice(start, start + _BLOCK)
        wanted = results[block]
        nodes = np.stack(np.unravel_index(tree.query(wanted)[1], (table.size,) * 3), axis=1).astype(np.float64)
        found[block] = _codes_at(table, _newton(flat, table.size, nodes, wanted))
    return found


def _newton(flat: Floats, size: int, positions: Floats, wanted: Floats) -> Floats:
    missed = wanted - tetrahedral(flat, size, positions)
    share = np.ones((len(positions), 1))
    active = np.flatnonzero((np.abs(missed) > _FOUND).any(axis=1))
    for _ in range(_STEPS):
        if not len(active):
            break
        step = _step(flat, size, positions[active], missed[active])
        reach = _BEYOND * (size - 1)
        tried = np.clip(positions[active] + share[active] * step, -reach, size - 1 + reach)
        left = wanted[active] - tetrahedral(flat, size, tried)
        better = (left * left).sum(axis=1) < (missed[active] ** 2).sum(axis=1)
        gained = active[better]
        positions[gained], missed[gained] = tried[better], left[better]
        share[active] = np.where(better[:, None], 1.0, share[active] / 2)
        active = active[((np.abs(missed[active]) > _FOUND).any(axis=1)) & (share[active, 0] > 1e-3)]
    return positions


def _step(flat: Floats, size: int, positions: Floats, missed: Floats) -> Floats:
    """Return the step in nodes that makes up for what is missed, as the tetrahedron around a position has it."""
    cell = np.clip(positions.astype(np.int64), 0, size - 2)
    order = np.argsort(-(positions - cell), axis=1, kind="stable")
    strides = np.array([size * size, size, 1])
    node = cell @ strides
    jacobian = np.empty((len(positions), 3, 3))
    rows = np.arange(len(positions))
    for rank in range(3):
        axis = order[:, rank]
        ahead = node + strides[axis]
        jacobian[rows, :, axis] = flat[ahead] - flat[node]
        node = ahead
    return np.asarray(np.linalg.solve(jacobian, missed[:, :, None])[:, :, 0])


def _codes_at(table: Table, positions: Floats) -> Codes:
    even = positions / (table.size - 1)
    if table.curves is None:
        return even
    knots = np.linspace(0.0, 1.0, table.curves.shape[1])
    inside = np.stack([np.interp(even[:, i], table.curves[i].astype(np.float64), knots) for i in range(3)], axis=1)
    return inside + even - np.clip(even, 0.0, 1.0)
