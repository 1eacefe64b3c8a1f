"""Whether a table leaves every code alone."""

from __future__ import annotations

import numpy as np

from hueferry.tables.lookup import node_codes
from hueferry.tables.table import Table

_ROUNDING = 2.0**-23
"""Two roundings of a 32-bit number near 1: one of the lattice, one of the curves."""


def is_identity(table: Table) -> bool:
    """Whether a table leaves every code of 0 … 1 alone, within 32-bit rounding."""
    nodes = node_codes(table.size, table.curves)
    wanted = np.stack(np.meshgrid(*nodes, indexing="ij"), axis=-1)
    if (np.abs(table.lattice - wanted) > _ROUNDING).any():
        return False
    if table.curves is None:
        return True
    even, knots = np.linspace(0.0, 1.0, table.size), np.linspace(0.0, 1.0, table.curves.shape[1])
    through = [np.interp(curve, even, places) for curve, places in zip(table.curves, nodes, strict=True)]
    return bool(np.abs(np.array(through) - knots).max() <= 4 * _ROUNDING)
