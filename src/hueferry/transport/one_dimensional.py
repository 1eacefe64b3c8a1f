"""Transport on a line: sorted against sorted."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Weights
from hueferry.errors import InputError

Line = NDArray[np.float64]

_LARGEST = 1e100


def monotone_coupling(
    source: Line, source_weights: Weights, target: Line, target_weights: Weights
) -> tuple[NDArray[np.intp], NDArray[np.intp], Line]:
    """Return the plan on a line as (rows, columns, mass): the k-th smallest mass of one goes to that of the other.

    It is optimal for |x − y|^p, every p >= 1.

    Args:
        source: (n,) positions.
        source_weights: (n,) shares that sum to 1; zeros are allowed.
        target: (m,) positions.
        target_weights: (m,) shares that sum to 1; zeros are allowed.

    Returns:
        At most n + m − 1 entries; indices refer to the arrays as given.

    Raises:
        InputError: positions and weights do not fit, or are not finite.

    References:
        Villani (2003), Topics in Optimal Transportation, theorem 2.18.
    """
    for positions, weights in ((source, source_weights), (target, target_weights)):
        if positions.ndim != 1 or positions.shape != weights.shape or len(positions) == 0:
            raise InputError(f"positions and weights must be one (n,) each, not {positions.shape}, {weights.shape}")
        if not np.isfinite(positions).all() or not np.isfinite(weights).all() or (weights < 0).any():
            raise InputError("positions and weights must be finite, and weights not negative")
        if not weights.sum() > 0 or np.abs(positions).max() > _LARGEST:
            raise InputError(f"weights must not all be 0, and positions lie within ±{_LARGEST:g}")
    rows, columns = np.argsort(source, kind="stable"), np.argsort(target, kind="stable")
    ends = np.cumsum(source_weights[rows]), np.cumsum(target_weights[columns])
    ends = ends[0] / ends[0][-1], ends[1] / ends[1][-1]
    cuts = np.sort(np.concatenate(ends))
    mass = np.diff(cuts, prepend=0.0)
    middle = cuts - mass / 2
    i = np.minimum(np.searchsorted(ends[0], middle, side="right"), len(rows) - 1)
    j = np.minimum(np.searchsorted(ends[1], middle, side="right"), len(columns) - 1)
    kept = mass > 0
    return rows[i[kept]], columns[j[kept]], mass[kept]


def wasserstein_1d(
    source: Line, source_weights: Weights, target: Line, target_weights: Weights, *, power: float = 2.0
) -> float:
    """Return W_p^p on a line, the mean |x − y|^p of the monotone plan; in the unit of the positions to the power p."""
    rows, columns, mass = monotone_coupling(source, source_weights, target, target_weights)
    return float(mass @ np.abs(source[rows] - target[columns]) ** power)
