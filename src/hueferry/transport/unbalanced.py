"""Transport that need not carry everything: soft marginals (KL), and a part of the mass."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Costs, Weights, read_only
from hueferry.errors import InputError, NotConverged
from hueferry.transport.entropic import soft_minimum
from hueferry.transport.exact import solve_exact
from hueferry.transport.plan import check_problem


@attrs.frozen(eq=False)
class UnbalancedPlan:
    """A coupling whose marginals are only near the masses.

    Attributes:
        coupling: (n, m) mass carried; >= 0.
        value: cost and penalties together, in the unit of the costs.
        mass: mass carried in all.
        iterations: how many the solver took.
    """

    coupling: NDArray[np.float64] = attrs.field(converter=read_only)
    value: float
    mass: float
    iterations: int


def solve_unbalanced(
    source: NDArray[np.float64],
    target: NDArray[np.float64],
    cost: Costs,
    *,
    penalty: float,
    epsilon: float,
    tolerance: float = 1e-9,
    iterations: int = 100_000,
) -> UnbalancedPlan:
    """Minimise ⟨P, C⟩ + ρ KL(P1 | a) + ρ KL(Pᵀ1 | b) + ε KL(P | a ⊗ b), with KL(p | q) = Σ p log(p/q) − p + q.

    Args:
        source: (n,) masses > 0; they need not sum to 1.
        target: (m,) masses > 0.
        cost: (n, m) finite costs.
        penalty: ρ > 0, in the unit of the costs: colours farther apart than that are rather left than carried.
        epsilon: ε > 0.
        tolerance: largest change of a potential accepted, in units of ε.
        iterations: at most.

    Raises:
        InputError: masses or parameters are not positive, or shapes do not fit.
        NotConverged: the potentials still move.

    References:
        Chizat, Peyré, Schmitzer & Vialard (2018), Scaling algorithms for unbalanced optimal transport problems.
    """
    if 0 in cost.shape or not (np.isfinite(source).all() and np.isfinite(target).all()):
        raise InputError("masses must be finite, and there must be some on both sides")
    if cost.shape != (len(source), len(target)) or not np.isfinite(cost).all():
        raise InputError(f"costs {cost.shape} must be finite and fit masses {source.shape} and {target.shape}")
    if not (penalty > 0 and epsilon > 0 and (source > 0).all() and (target > 0).all()):
        raise InputError("masses, penalty and blur must be positive")
    damp = penalty / (penalty + epsilon)
    f, g = np.zeros(len(source)), np.zeros(len(target))
    change, done = np.inf, 0
    while change > tolerance:
        if done == iterations:
            raise NotConverged("unbalanced", done, change, tolerance)
        done += 1
        f_new = damp * soft_minimum(cost, g, target, epsilon)
        g_new = damp * soft_minimum(cost.T, f_new, source, epsilon)
        change = max(float(np.abs(f_new - f).max()), float(np.abs(g_new - g).max())) / epsilon
        f, g = f_new, g_new
    product = source[:, None] * target[None, :]
    coupling = product * np.exp((f[:, None] + g[None, :] - cost) / epsilon)
    value = float((coupling * cost).sum()) + epsilon * generalised_kl(coupling, product)
    value += penalty * (generalised_kl(coupling.sum(axis=1), source) + generalised_kl(coupling.sum(axis=0), target))
    return UnbalancedPlan(coupling, value, float(coupling.sum()), done)


def generalised_kl(p: NDArray[np.float64], q: NDArray[np.float64]) -> float:
    """Return Σ p log(p/q) − p + q in nats, for masses of the same shape with q > 0."""
    with np.errstate(divide="ignore", invalid="ignore"):
        terms = np.where(p > 0, p * np.log(np.where(p > 0, p, 1.0) / q), 0.0)
    return float((terms - p + q).sum())


def solve_partial(source: Weights, target: Weights, cost: Costs, *, mass: float) -> UnbalancedPlan:
    """Carry a share of the mass only, the cheapest, by an exact plan with one more place on either side to stay.

    Args:
        source: (n,) weights that sum to 1.
        target: (m,) weights that sum to 1.
        cost: (n, m) costs >= 0.
        mass: share carried, 0 < mass <= 1.

    Raises:
        InputError: the problem is not one, a cost is negative, or the share is out of range.
        SolverError: the plan could not be vouched for.

    References:
        Caffarelli & McCann (2010), Free boundaries in optimal transport; the extended problem of Chapel, Alaya & Gasso
        (2020).
    """
    check_problem(source, target, cost)
    if not 0 < mass <= 1 or (cost < 0).any():
        raise InputError(f"a share of 0 … 1 can be carried at costs >= 0, not {mass}")
    rest = 1.0 - mass
    extended = np.zeros((len(source) + 1, len(target) + 1))
    extended[:-1, :-1] = cost
    extended[-1, -1] = 2 * float(cost.max()) + 1.0  # staying on both sides at once would carry nothing
    a, b = np.append(source, rest) / (1 + rest), np.append(target, rest) / (1 + rest)
    coupling = solve_exact(a, b, extended).coupling[:-1, :-1] * (1 + rest)
    return UnbalancedPlan(coupling, float((coupling * cost).sum()), float(coupling.sum()), 1)
