"""What a table must obey before it may be applied, and the cells where it does not."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.picture import Encoding
from hueferry.tables.cells import Cells, Occupied
from hueferry.tables.folds import determinants_within, orientation
from hueferry.tables.gains import steeper
from hueferry.tables.lookup import lattice_positions
from hueferry.tables.ramps import uneven_codes
from hueferry.tables.table import Table

Box = tuple[slice, slice, slice]
"""A range of nodes along each channel, or of the cells that begin at them."""

EVERYWHERE: Box = (slice(None), slice(None), slice(None))


@attrs.frozen(eq=False, kw_only=True)
class Offences:
    """The cells of a table that may not stay as they are.

    Attributes:
        folded: cells with a negative determinant.
        steep: occupied cells beyond the gain cap.
        uneven: cells on a ramp that falls or jumps.
    """

    folded: Cells
    steep: Cells
    uneven: Cells

    @property
    def cells(self) -> Cells:
        """All of them."""
        return np.asarray(self.folded | self.steep | self.uneven)

    @property
    def any(self) -> bool:
        """Whether there are any."""
        return bool(self.cells.any())


@attrs.frozen(eq=False, kw_only=True)
class Rules:
    """What a table must obey.

    Attributes:
        occupied: colours of the pictures it is for.
        encoding: what it reads.
        output: what it writes.
        max_gain: the gain cap on occupied cells.
    """

    occupied: Occupied
    encoding: Encoding
    output: Encoding
    max_gain: float

    def offences(self, table: Table, within: Box = EVERYWHERE) -> Offences:
        """Return the cells `within` a box that fold or stretch too much, and all that make a ramp uneven."""
        folded = orientation(table).folded if within == EVERYWHERE else _folded_within(table, within)
        cells = np.zeros_like(folded)
        cells[within] = self.occupied.cells(table)[within]
        steep = np.zeros_like(folded)
        steep[cells] = steeper(table, cells, self.max_gain)
        uneven = np.zeros_like(folded)
        places = lattice_positions(table, uneven_codes(table, self.encoding, self.output)).astype(np.int64)
        uneven[tuple(np.minimum(places, table.size - 2).T)] = True
        return Offences(folded=folded, steep=steep, uneven=uneven)

    def obeyed(self, table: Table) -> bool:
        """Whether nothing offends."""
        return not self.offences(table).any


def _folded_within(table: Table, within: Box) -> Cells:
    folded = np.zeros((table.size - 1,) * 3, dtype=bool)
    nodes = tuple(slice(side.start, None if side.stop is None else side.stop + 1) for side in within)
    folded[within] = (determinants_within(table.lattice[nodes], table.size - 1.0) < 0).any(axis=0)
    return folded
