"""Entropic plans: log-domain iterations on a stabilised kernel, with ε-scaling.

Convention: min ⟨P, C⟩ + ε KL(P | a ⊗ b), and P_ij = a_i b_j exp((f_i + g_j − C_ij) / ε).
"""

from __future__ import annotations

from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Costs, Weights
from hueferry.errors import InputError, NotConverged
from hueferry.transport.plan import Plan, check_problem, misplaced_mass

Potential = NDArray[np.float64]

_SHRINK = 0.25
"""Factor from one ε to the next on the way down from the largest cost."""

_ABSORB = 1e8
"""Scaling beyond which it is taken up into the potentials, so that float32 kernels neither overflow nor vanish."""

_OVER = 1.6
"""Exponent of the over-relaxed row scaling (Thibault, Chizat, Dossal & Papadakis 2021, Overrelaxed Sinkhorn)."""

_VANISHED = 1e-24
"""Mass too small to matter in a coupling; kept, it would turn into subnormal numbers, which cost ten times the time."""


@attrs.frozen(eq=False)
class Potentials:
    """What the iterations found: (n,) f and (m,) g, misplaced mass and iterations."""

    f: Potential
    g: Potential
    misplaced: float
    iterations: int


def solve_entropic(
    source: Weights, target: Weights, cost: Costs, *, epsilon: float, tolerance: float = 1e-6, iterations: int = 20_000
) -> Plan:
    """Find the entropic plan between two palettes.

    Args:
        source: (n,) weights, summing to 1; zeros are allowed.
        target: (m,) weights, summing to 1; zeros are allowed.
        cost: (n, m) costs.
        epsilon: blur of the plan, in the unit of `cost`; > 0.
        tolerance: largest misplaced mass accepted, as a share of 1.
        iterations: at most, over all ε.

    Returns:
        A plan; its `gap` is ⟨P, C⟩ less the unregularised dual value of feasible potentials, a bound of its distance
        from the optimal transport cost.

    Raises:
        InputError: the problem is not one, or `epsilon` is not positive.
        NotConverged: the iterations left more than `tolerance` misplaced.

    References:
        Cuturi (2013), Sinkhorn distances; Schmitzer (2019), Stabilized sparse scaling algorithms; Peyré & Cuturi
        (2019), Computational Optimal Transport, section 4.4.
    """
    from hueferry.transport.exact import feasible_potentials

    check_problem(source, target, cost)
    found = entropic_potentials(
        source, target, cost, epsilon=epsilon, tolerance=tolerance, iterations=iterations, dtype=np.float64
    )
    exponent = (found.f[:, None] + found.g[None, :] - cost) / epsilon
    coupling = source[:, None] * target[None, :] * np.exp(np.minimum(exponent, 700.0))
    misplaced = misplaced_mass(coupling, source, target)
    if not misplaced <= 2 * tolerance:
        raise NotConverged("entropic", found.iterations, misplaced, tolerance)
    value = float((coupling * cost).sum())
    f, g = feasible_potentials(found.f, found.g, cost)
    gap = max(value - float(source @ f + target @ g), 0.0)
    return Plan(coupling, value, (found.f, found.g), gap, misplaced, found.iterations)


def entropic_potentials(
    source: Weights,
    target: Weights,
    cost: Costs,
    *,
    epsilon: float,
    tolerance: float = 1e-3,
    iterations: int = 20_000,
    dtype: type[np.float32] | type[np.float64] = np.float32,
) -> Potentials:
    """Find the potentials alone, in float32 by default: what maps need.

    Args:
        source: (n,) weights, summing to 1; zeros are allowed.
        target: (m,) weights, summing to 1; zeros are allowed.
        cost: (n, m) costs.
        epsilon: blur of the plan, in the unit of `cost`; > 0.
        tolerance: largest misplaced mass accepted, as a share of 1.
        iterations: at most, over all ε.
        dtype: of the kernel.

    Raises:
        InputError: `epsilon` is not positive.
        NotConverged: the iterations left more than `tolerance` misplaced.
    """
    problem = _Problem.of(source, target, cost, epsilon=epsilon, dtype=dtype)
    g, spent = np.zeros(len(problem.b)), 0
    for level in _levels(float(problem.cost.max()), epsilon)[:-1]:
        budget = min(60, iterations - spent)
        _, g, _, used = _iterate(problem, g, epsilon=level, tolerance=max(tolerance, 1e-2), iterations=budget)
        spent += used
    return _finish(problem, g, tolerance=tolerance, iterations=iterations, spent=spent)


def warm_potentials(
    source: Weights, target: Weights, cost: Costs, start: Potential, *, epsilon: float, tolerance: float = 1e-3
) -> Potentials:
    """Find the potentials from (m,) g of a problem that differs little, without coming down from a large ε.

    Raises:
        InputError: `epsilon` is not positive.
        NotConverged: too much mass is still misplaced after 20,000 iterations.
    """
    problem = _Problem.of(source, target, cost, epsilon=epsilon, dtype=np.float32)
    g = np.asarray(start, dtype=np.float64)[problem.columns]
    return _finish(problem, g, tolerance=tolerance, iterations=20_000, spent=0)


@attrs.frozen(eq=False)
class _Problem:
    """What is left of a problem without the colours that have no weight."""

    a: Weights
    b: Weights
    cost: NDArray[Any]
    epsilon: float
    rows: NDArray[np.bool_]
    columns: NDArray[np.bool_]

    @classmethod
    def of(
        cls,
        source: Weights,
        target: Weights,
        cost: Costs,
        *,
        epsilon: float,
        dtype: type[np.float32] | type[np.float64],
    ) -> _Problem:
        if not epsilon > 0 or not np.isfinite(epsilon):
            raise InputError(f"the blur ε must be positive, not {epsilon}")
        check_problem(source, target, cost)
        rows, columns = source > 0, target > 0
        inner = np.ascontiguousarray(cost[np.ix_(rows, columns)], dtype=dtype)
        return cls(source[rows], target[columns], inner, epsilon, rows, columns)


def _finish(problem: _Problem, g: Potential, *, tolerance: float, iterations: int, spent: int) -> Potentials:
    f, g, misplaced, used = _iterate(
        problem, g, epsilon=problem.epsilon, tolerance=tolerance, iterations=iterations - spent
    )
    if not misplaced <= tolerance:
        raise NotConverged("entropic", spent + used, misplaced, tolerance)
    return Potentials(_everywhere(f, problem.rows), _everywhere(g, problem.columns), misplaced, spent + used)


def soft_minimum(cost: NDArray[Any], potential: Potential, weights: Weights, epsilon: float) -> Potential:
    """Return −ε log Σ_j w_j exp((g_j − C_ij) / ε) for every row i, in the log domain.

    This is the soft c-transform; it extends a potential to any point (Peyré & Cuturi 2019, section 5.3).
    """
    exponent = (potential[None, :].astype(cost.dtype) - cost) / cost.dtype.type(epsilon)
    peak = exponent.max(axis=1)
    np.exp(exponent - peak[:, None], out=exponent)
    return np.asarray(
        -epsilon * (peak.astype(np.float64) + np.log((exponent @ weights.astype(cost.dtype)).astype(np.float64)))
    )


def _levels(largest: float, epsilon: float) -> list[float]:
    levels = []
    level = largest
    while level > epsilon:
        levels.append(level)
        level *= _SHRINK
    return [*levels, epsilon]


def _everywhere(potential: Potential, kept: NDArray[np.bool_]) -> Potential:
    full = np.full(len(kept), float(potential.min(initial=0.0)))
    full[kept] = potential
    return full


def _iterate(
    problem: _Problem, g: Potential, *, epsilon: float, tolerance: float, iterations: int
) -> tuple[Potential, Potential, float, int]:
    """Scale rows and columns at one ε until the rows are right; columns are exact after every round."""
    a, b, cost = problem.a, problem.b, problem.cost
    f = soft_minimum(cost, g, b, epsilon)
    g = soft_minimum(cost.T, f, a, epsilon)
    kernel, u, v = _kernel(cost, f, g, a, b, epsilon), np.ones(len(a)), np.ones(len(b))
    misplaced = before = np.inf
    for used in range(1, iterations + 1):
        rows = (kernel @ v.astype(kernel.dtype)).astype(np.float64)
        misplaced = float(np.abs(u * rows - a).sum())
        if misplaced <= tolerance:
            return f + epsilon * np.log(u), g + epsilon * np.log(v), misplaced, used
        # Beyond the exact scaling while that helps: a round that misplaces more is followed by a plain one.
        reach = _OVER if misplaced < before else 1.0
        u, before = (a / np.maximum(rows, 1e-300)) ** reach * u ** (1.0 - reach), misplaced
        columns = (kernel.T @ u.astype(kernel.dtype)).astype(np.float64)
        v = b / np.maximum(columns, 1e-300)
        if max(u.max(), v.max(), 1 / u.min(), 1 / v.min()) > _ABSORB:
            f = soft_minimum(cost, g + epsilon * np.log(v), b, epsilon)
            g = soft_minimum(cost.T, f, a, epsilon)
            kernel, u, v = _kernel(cost, f, g, a, b, epsilon), np.ones(len(a)), np.ones(len(b))
    return f + epsilon * np.log(u), g + epsilon * np.log(v), misplaced, iterations


def _kernel(cost: NDArray[Any], f: Potential, g: Potential, a: Weights, b: Weights, epsilon: float) -> NDArray[Any]:
    """Return the coupling that the potentials give; scaling it keeps its numbers near 1."""
    kind = cost.dtype.type
    kernel = np.exp((f.astype(kind)[:, None] + g.astype(kind)[None, :] - cost) / kind(epsilon))
    kernel *= a.astype(kind)[:, None] * b.astype(kind)[None, :]
    kernel[kernel < _VANISHED] = 0.0
    return np.asarray(kernel)


def self_potential(weights: Weights, cost: Costs, *, epsilon: float, rounds: int = 60) -> Potential:
    """Return the one potential of the entropic plan from a palette to itself.

    References:
        Feydy et al. (2019), section 3.1: averaging each update with the last converges in a few rounds.
    """
    kept = weights > 0
    own = weights[kept]
    inner = np.ascontiguousarray(cost[np.ix_(kept, kept)], dtype=np.float32)
    potential = np.zeros(len(own))
    for _ in range(rounds):
        updated = soft_minimum(inner, potential, own, epsilon)
        change = float(np.abs(updated - potential).max())
        potential = (potential + updated) / 2
        if change <= 1e-4 * epsilon:
            break
    return _everywhere(potential, kept)
