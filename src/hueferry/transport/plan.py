"""The plan: a coupling with its cost, dual potentials and gap."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Costs, Weights, read_only
from hueferry.errors import InputError


@attrs.frozen(eq=False)
class Plan:
    """A coupling of two palettes, and how far to trust it.

    Attributes:
        coupling: (n, m) mass carried from source i to target j; >= 0.
        cost: what it costs, in the unit of the costs.
        potentials: dual potentials (n,) and (m,), in the unit of the costs.
        gap: cost less dual value, an upper bound of how far the cost is from the optimum; 0 proves optimality.
        misplaced: mass that is not where the marginals want it, as a share of 1 (L1, rows and columns together).
        iterations: how many the solver took; for exact plans, how many it was allowed.
    """

    coupling: NDArray[np.float64] = attrs.field(converter=read_only)
    cost: float
    potentials: tuple[NDArray[np.float64], NDArray[np.float64]]
    gap: float
    misplaced: float
    iterations: int


def check_problem(source: Weights, target: Weights, cost: Costs) -> None:
    """Check a transport problem once, on the way in.

    Raises:
        InputError: shapes do not fit, values are not finite, or weights are negative or do not sum to 1.
    """
    if source.ndim != 1 or target.ndim != 1 or cost.shape != (len(source), len(target)) or 0 in cost.shape:
        raise InputError(f"costs {cost.shape} do not fit weights {source.shape} and {target.shape}")
    if not np.isfinite(cost).all():
        raise InputError("costs must be finite")
    for name, weights in (("source", source), ("target", target)):
        if not np.isfinite(weights).all() or (weights < 0).any():
            raise InputError(f"{name} weights must be finite and not negative")
        if abs(float(weights.sum()) - 1.0) > 1e-6:
            raise InputError(f"{name} weights must sum to 1, not {float(weights.sum()):.9g}")


def misplaced_mass(coupling: NDArray[np.float64], source: Weights, target: Weights) -> float:
    """Return the L1 distance of a coupling's marginals from the weights, rows and columns together."""
    return float(np.abs(coupling.sum(axis=1) - source).sum() + np.abs(coupling.sum(axis=0) - target).sum())
