"""The certificate: what was measured on the very table that is applied."""

from __future__ import annotations

from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Codes
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import xyz_to_lab
from hueferry.picture import Encoding
from hueferry.tables.build import CodeFunction
from hueferry.tables.cells import Cells, Occupied
from hueferry.tables.folds import orientation
from hueferry.tables.gains import gains
from hueferry.tables.lookup import look_up
from hueferry.tables.ramps import Ramp, read_ramps
from hueferry.tables.table import Table

HALF_CODE = 0.5 / 255
"""Half a step of 8 bit: nearer to an end than this is at the end."""


@attrs.frozen
class TableError:
    """How far a table is from its map, over the occupied colours and the middles of the occupied cells.

    Attributes:
        mean: mean over colours of the largest channel's error, in 8-bit codes.
        high: the same, 99.9th percentile.
        mean_delta_e: mean error, ΔE00.
        largest_delta_e: largest error, ΔE00.
    """

    mean: float
    high: float
    mean_delta_e: float
    largest_delta_e: float


@attrs.frozen(kw_only=True)
class Certificate:
    """What was measured on a table.

    Attributes:
        size: nodes along an axis.
        tetrahedra: how many there are; the table is affine in each, so folds and gains are exact.
        folds: tetrahedra that reverse orientation (negative Jacobian determinant), occupied or not.
        flat: tetrahedra whose determinant is zero within float32 rounding; they lose a dimension, but reverse nothing.
        largest_gain: largest singular value of the Jacobian on occupied cells, in code values.
        smallest_gain: smallest singular value on occupied cells.
        max_gain: the cap that was asked for.
        occupied_cells: cells with colours, with a margin of one cell.
        newly_clipped: share of the picture that leaves 0 … 1 in a channel that was inside before.
        neutral_drift: largest chroma, C*ab D50, that a gray of the input gets.
        ramps: how evenly gray, skin and sky ramps rise.
        error: distance from the map; None if the map is not at hand.
    """

    size: int
    tetrahedra: int
    folds: int
    flat: int
    largest_gain: float
    smallest_gain: float
    max_gain: float
    occupied_cells: int
    newly_clipped: float
    neutral_drift: float
    ramps: tuple[Ramp, ...]
    error: TableError | None = None

    @property
    def safe(self) -> bool:
        """Whether nothing folds, no occupied cell exceeds the gain cap, and every ramp rises."""
        return self.folds == 0 and self.largest_gain <= self.max_gain + 1e-6 and all(r.rises for r in self.ramps)

    def as_dict(self) -> dict[str, Any]:
        """Return the certificate as JSON values."""
        return {**attrs.asdict(self), "ramps": [attrs.asdict(ramp) for ramp in self.ramps], "safe": self.safe}

    def sentences(self) -> tuple[str, ...]:
        """Say it in plain words."""
        return (*self._shape(), *self._colour(), *self._error())

    def _shape(self) -> list[str]:
        folds = "no fold" if self.folds == 0 else f"{self.folds} folds"
        return [
            f"table of {self.size} nodes an axis, {folds} in {self.tetrahedra} tetrahedra",
            f"gain {self.smallest_gain:.2f} to {self.largest_gain:.2f} on occupied cells (cap {self.max_gain:g})",
        ]

    def _colour(self) -> list[str]:
        said = [
            f"{100 * self.newly_clipped:.2f} % newly clipped",
            f"grays drift by up to {self.neutral_drift:.1f} C*ab",
        ]
        return said + [f"the {ramp.name} ramp does not rise evenly" for ramp in self.ramps if not ramp.rises]

    def _error(self) -> list[str]:
        if self.error is None:
            return []
        return [
            f"table error {self.error.mean:.2f} codes on average, {self.error.high:.2f} at the 99.9th percentile "
            f"(of 255), at most {self.error.largest_delta_e:.2f} ΔE00"
        ]


def certify(
    table: Table,
    *,
    occupied: Occupied,
    encoding: Encoding,
    max_gain: float = 4.0,
    output: Encoding | None = None,
    error: TableError | None = None,
    function: CodeFunction | None = None,
) -> Certificate:
    """Measure a table.

    Args:
        table: the table.
        occupied: the colours of the pictures it is for.
        encoding: what the table reads.
        max_gain: the gain cap.
        output: what the table writes; None means `encoding`.
        error: the table error, where it is known already.
        function: what the table approximates (`code_function`), for the table error where it is not.
    """
    written = encoding if output is None else output
    cells = occupied.cells(table)
    turned = orientation(table)
    largest, smallest = gains(table, cells)
    return Certificate(
        size=table.size,
        tetrahedra=turned.tetrahedra,
        folds=turned.folds,
        flat=turned.flat,
        largest_gain=float(largest.max()),
        smallest_gain=float(smallest.min()),
        max_gain=max_gain,
        occupied_cells=int(cells.sum()),
        newly_clipped=newly_clipped(table, occupied),
        neutral_drift=neutral_drift(table, written),
        ramps=read_ramps(table, encoding, written),
        error=error if function is None else table_error(table, function, occupied, encoding=written),
    )


def newly_clipped(table: Table, occupied: Occupied) -> float:
    """Return the share whose result leaves 0 … 1 by half an 8-bit code in a channel that was not at an end before."""
    result = look_up(table, occupied.codes)
    inside = (occupied.codes > HALF_CODE) & (occupied.codes < 1 - HALF_CODE)
    outside = (result < -HALF_CODE) | (result > 1 + HALF_CODE)
    return float(occupied.weights[(inside & outside).any(axis=1)].sum())


def neutral_drift(table: Table, encoding: Encoding) -> float:
    """Return the largest chroma, C*ab D50, of what 256 grays become."""
    grays = np.repeat(np.linspace(0.0, 1.0, 256)[:, None], 3, axis=1)
    lab = xyz_to_lab(encoding.to_xyz(np.clip(look_up(table, grays), 0.0, 1.0)))
    return float(np.hypot(lab[:, 1], lab[:, 2]).max())


def table_error(table: Table, function: CodeFunction, occupied: Occupied, *, encoding: Encoding) -> TableError:
    """Compare a table with what it approximates, on occupied colours and in the middles of occupied cells.

    Results are compared as they are shown, clipped to 0 … 1. `encoding` is what the table writes.
    """
    codes = np.concatenate([occupied.codes, cell_middles(table, occupied.cells(table, margin=0))])
    got = np.clip(look_up(table, codes), 0.0, 1.0)
    wanted = np.clip(function(codes), 0.0, 1.0)
    error = 255 * np.abs(got - wanted).max(axis=1)
    seen = delta_e_2000(xyz_to_lab(encoding.to_xyz(got)), xyz_to_lab(encoding.to_xyz(wanted)))
    return TableError(
        float(error.mean()), float(np.quantile(error, 0.999)), float(seen.mean()), float(seen.max(initial=0.0))
    )


def cell_middles(table: Table, cells: Cells) -> Codes:
    """Return the (m, 3) input codes in the middles of `cells`."""
    from hueferry.tables.lookup import node_codes

    nodes = node_codes(table.size, table.curves)
    middles = (nodes[:, 1:] + nodes[:, :-1]) / 2
    index = np.argwhere(cells)
    return np.stack([middles[axis, index[:, axis]] for axis in range(3)], axis=1)
