"""The table: the lattice form of a map, the one that is saved, certified and applied."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Lattice
from hueferry.errors import InputError


def _frozen_float32(array: object) -> NDArray[np.float32]:
    copy = np.array(array, dtype=np.float32, copy=True, order="C")
    copy.flags.writeable = False
    return copy


@attrs.frozen(eq=False)
class Table:
    """A lattice read by tetrahedral interpolation, after one curve a channel that never falls.

    Attributes:
        lattice: (n, n, n, 3) float32 output codes, 0 … 1 with room beyond (results are clipped after interpolation);
            indexed [red, green, blue]; 2 <= n <= 129, all finite.
        curves: (3, k) float32 input curves over k equal steps of 0 … 1, none falling anywhere, from 0 to 1, read by
            linear interpolation; None where the lattice is spaced evenly in code values.
    """

    lattice: Lattice = attrs.field(converter=_frozen_float32)
    curves: NDArray[np.float32] | None = attrs.field(default=None, converter=attrs.converters.optional(_frozen_float32))

    @lattice.validator
    def _check_lattice(self, _: object, value: Lattice) -> None:
        n = value.shape[0]
        if value.shape != (n, n, n, 3) or not 2 <= n <= 129:
            raise InputError(f"a lattice is (n, n, n, 3) with 2 <= n <= 129, not {value.shape}")
        if not np.isfinite(value).all():
            raise InputError("a lattice must be finite")

    @curves.validator
    def _check_curves(self, _: object, value: NDArray[np.float32] | None) -> None:
        if value is None:
            return
        if value.ndim != 2 or value.shape[0] != 3 or value.shape[1] < 2:
            raise InputError(f"input curves are (3, k) with k >= 2, not {value.shape}")
        if not (np.diff(value, axis=1) >= 0).all() or (value[:, 0] != 0).any() or (value[:, -1] != 1).any():
            raise InputError("input curves must rise from 0 to 1")

    @property
    def size(self) -> int:
        """Nodes along each axis."""
        return int(self.lattice.shape[0])
