"""Exact plans by the network simplex of POT, with dual potentials that prove them."""

from __future__ import annotations

import warnings

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Costs, Weights
from hueferry.errors import SolverError
from hueferry.transport.plan import Plan, check_problem, misplaced_mass

_ITERATIONS = 2_000_000


def solve_exact(source: Weights, target: Weights, cost: Costs, *, iterations: int = _ITERATIONS) -> Plan:
    """Find an optimal plan; the gap bounds how far its cost is from the optimum, also if the iterations ran out.

    Args:
        source: (n,) weights that sum to 1; zeros are allowed.
        target: (m,) weights that sum to 1; zeros are allowed.
        cost: (n, m) finite costs.
        iterations: pivots at most.

    Raises:
        InputError: the problem is not one.
        SolverError: the solver gave something that is no plan.

    References:
        Kantorovich (1942); Bonneel, van de Panne, Paris & Heidrich (2011) for the network simplex that POT uses.
    """
    check_problem(source, target, cost)
    import ot

    a, b = source / source.sum(), target / target.sum()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # running out of iterations shows in the gap
        coupling, log = ot.emd(a, b, np.ascontiguousarray(cost), numItermax=iterations, log=True)
    f, g = feasible_potentials(np.asarray(log["u"]), np.asarray(log["v"]), cost)
    value = float((coupling * cost).sum())
    misplaced = misplaced_mass(coupling, a, b)
    if not np.isfinite(value) or misplaced > 1e-6 or (coupling < -1e-12).any():
        raise SolverError(f"the exact solver misplaced {misplaced:.3g} of the mass")
    gap = max(value - float(a @ f + b @ g), 0.0)
    return Plan(np.maximum(coupling, 0.0), value, (f, g), gap, misplaced, iterations)


def feasible_potentials(
    f: NDArray[np.float64], g: NDArray[np.float64], cost: Costs
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return dual potentials with f_i + g_j <= c_ij everywhere: one c-transform each way (Villani 2003, 1.2).

    They never give a smaller dual value than feasible ones did, so the gap they give is valid and tight.
    """
    f = (cost - g[None, :]).min(axis=1)
    g = (cost - f[:, None]).min(axis=0)
    return f, g
