"""What it takes to carry one cloud of colours over to another, in RMS ΔE*ab."""

from __future__ import annotations

import attrs
import numpy as np

from hueferry.arrays import Costs, Lab, Weights
from hueferry.errors import NotConverged
from hueferry.measure.cloud import LabCloud
from hueferry.measure.lines import squared_on_lines
from hueferry.transport.costs import squared_distances
from hueferry.transport.gaussian import gaussian_w2_squared
from hueferry.transport.sliced import turned_directions

BLUR = 5.0
"""Blur of the Sinkhorn divergence in ΔE*ab: differences of detail much smaller than this do not count in it."""

_BRACKET_EPSILON = (6.0, 20.0)
_REPLICATES = 8
_LINES = 24


@attrs.frozen
class Bracket:
    """A transport cost and how much larger it may be.

    Attributes:
        value: proven from below, ΔE*ab.
        gap: the optimum lies in value … value + gap.
    """

    value: float
    gap: float


@attrs.frozen
class Estimate:
    """A mean over random directions, with its standard error."""

    value: float
    error: float


def exact_w1(first: LabCloud, second: LabCloud) -> Bracket:
    """Return W1, the mean ΔE*ab of the cheapest plan, with its duality gap (Kantorovich 1942; Monge's cost)."""
    from hueferry.transport.exact import solve_exact

    plan = solve_exact(first.weights, second.weights, np.sqrt(_squared(first, second)))
    return Bracket(max(plan.cost - plan.gap, 0.0), plan.gap)


def exact_w2(first: LabCloud, second: LabCloud) -> Bracket:
    """Return W2, the root mean square ΔE*ab of the cheapest plan for squared distances, with its duality gap."""
    from hueferry.transport.exact import solve_exact

    plan = solve_exact(first.weights, second.weights, _squared(first, second))
    return _rooted(plan.cost - plan.gap, plan.cost)


def bracketed_w2(first: LabCloud, second: LabCloud) -> Bracket:
    """Bracket W2 by an entropic plan: its dual potentials prove the value, its coupling how much more it may be.

    The normals with the clouds' means and covariances are never further apart than the clouds (Gelbrich 1990).
    """
    from hueferry.transport.entropic import entropic_potentials
    from hueferry.transport.exact import feasible_potentials

    below = gaussian_w2(first, second)
    epsilon = float(np.clip(0.05 * below**2, *_BRACKET_EPSILON))
    cost = _squared(first, second)
    try:
        found = entropic_potentials(first.weights, second.weights, cost, epsilon=epsilon, tolerance=0.02)
    except NotConverged:
        return exact_w2(first, second)
    f, g = feasible_potentials(found.f, found.g, cost)
    proven = max(float(first.weights @ f + second.weights @ g), below**2)
    density = np.exp(np.minimum((found.f[:, None] + found.g[None, :] - cost) / epsilon, 50.0))
    coupling = round_to_plan(first.weights[:, None] * second.weights[None, :] * density, first.weights, second.weights)
    return _rooted(proven, max(float((coupling * cost).sum()), proven))


def round_to_plan(coupling: Costs, source: Weights, target: Weights) -> Costs:
    """Make a plan of an (n, m) array that is nearly one: what is too much is cut, what then lacks is added.

    References:
        Altschuler, Weed & Rigollet (2017), Near-linear time approximation algorithms for optimal transport, alg. 2.
    """
    tiny = np.finfo(float).tiny
    coupling = coupling * np.minimum(source / np.maximum(coupling.sum(axis=1), tiny), 1.0)[:, None]
    coupling = coupling * np.minimum(target / np.maximum(coupling.sum(axis=0), tiny), 1.0)[None, :]
    rows, columns = source - coupling.sum(axis=1), target - coupling.sum(axis=0)
    lacking = float(rows.sum())
    return coupling if lacking <= 0 else np.asarray(coupling + np.outer(rows, columns) / lacking)


def gaussian_w2(first: LabCloud, second: LabCloud) -> float:
    """Return W2 between the normals with the clouds' means and covariances (Dowson & Landau 1982)."""
    p, q = first.normal, second.normal
    return float(np.sqrt(gaussian_w2_squared(p.mean, p.covariance, q.mean, q.covariance)))


def sliced_w2(first: LabCloud, second: LabCloud, *, seed: int = 0) -> Estimate:
    """Return the sliced W2 with its standard error, from evenly spread lines turned at random eight times."""
    turned = [turned_directions(_LINES, 3, seed=seed * _REPLICATES + number) for number in range(_REPLICATES)]
    squared = np.array([squared_on_lines(first, second, directions).mean() for directions in turned])
    value = float(np.sqrt(squared.mean()))
    error = float(squared.std(ddof=1) / np.sqrt(_REPLICATES))
    return Estimate(value, error / (2 * value) if value > 0 else 0.0)


def sinkhorn_divergence(first: LabCloud, second: LabCloud, *, blur: float = BLUR) -> float:
    """Return the square root of the Sinkhorn divergence at ε = 2 · blur², in ΔE*ab.

    It is 0 only for equal clouds, tends to W2 as the blur shrinks and to the distance of the means as it grows.

    References:
        Feydy et al. (2019), Interpolating between optimal transport and MMD using Sinkhorn divergences.
    """
    epsilon = 2 * blur**2
    own, other = _own_value(first, epsilon), _own_value(second, epsilon)
    same = np.array_equal(first.colours, second.colours) and np.array_equal(first.weights, second.weights)
    across = own if same else _entropic_value(first, second, epsilon)
    return float(np.sqrt(max(across - own / 2 - other / 2, 0.0)))


def _entropic_value(first: LabCloud, second: LabCloud, epsilon: float) -> float:
    """Return OT_ε; a dual value, so what the iterations leave misplaced counts in the second order only."""
    from hueferry.transport.entropic import entropic_potentials, soft_minimum

    cost = _squared(first, second)
    for tolerance in (1e-4, 1e-2):
        try:
            found = entropic_potentials(
                first.weights, second.weights, cost, epsilon=epsilon, tolerance=tolerance, dtype=np.float64
            )
        except NotConverged:
            continue
        f = soft_minimum(cost, found.g, second.weights, epsilon)
        return float(first.weights @ f + second.weights @ found.g)
    raise NotConverged("entropic", 20_000, 1e-2, 1e-2)


def _own_value(cloud: LabCloud, epsilon: float) -> float:
    """Return OT_ε of a cloud with itself; its two potentials are equal, and averaged steps reach them in a few rounds.

    References:
        Feydy et al. (2019), section 3.1: f ← ½ (f + T f).
    """
    from hueferry.transport.entropic import soft_minimum

    cost, f = _squared(cloud, cloud), np.zeros(len(cloud.weights))
    for _ in range(500):
        step = soft_minimum(cost, f, cloud.weights, epsilon) - f
        f = f + step / 2
        if float(np.abs(step).max()) <= 1e-8 * epsilon:
            break
    return float(2 * cloud.weights @ f)


def _squared(first: LabCloud, second: LabCloud) -> Costs:
    middle: Lab = (first.mean + second.mean) / 2  # near the origin the product form keeps its digits
    cost = squared_distances(first.colours - middle, second.colours - middle)
    cost[cost < 1e-9] = 0.0
    return cost


def _rooted(below: float, above: float) -> Bracket:
    value = float(np.sqrt(max(below, 0.0)))
    return Bracket(value, max(float(np.sqrt(max(above, 0.0))) - value, 0.0))
