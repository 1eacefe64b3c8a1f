"""Transport costs: closed forms, laws, and brackets that hold."""

from __future__ import annotations

import numpy as np
import ot
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hueferry.measure import transport_costs as costs
from measure.clouds import cloud, scattered, weights_of

SEEDS = st.integers(0, 10_000)


def some(seed: int):
    return cloud(scattered(seed, 30), weights_of(seed, 30))


@settings(max_examples=25, deadline=None)
@given(seed=SEEDS)
def test_exact_costs_are_those_of_linear_programming(seed: int) -> None:
    """Oracle: SciPy's HiGHS on the transport problem."""
    from scipy.optimize import linprog

    first, second = some(seed), some(seed + 1)
    n, m = 30, 30
    rows = np.kron(np.eye(n), np.ones(m))
    columns = np.kron(np.ones(n), np.eye(m))
    distance = np.linalg.norm(first.colours[:, None] - second.colours[None], axis=2)
    limits = np.concatenate([first.weights, second.weights])
    one, two = (
        linprog(c.ravel(), A_eq=np.concatenate([rows, columns]), b_eq=limits, method="highs").fun
        for c in (distance, distance**2)
    )

    w1, w2 = costs.exact_w1(first, second), costs.exact_w2(first, second)

    assert w1.value == pytest.approx(one, rel=1e-7)
    assert w2.value == pytest.approx(np.sqrt(two), rel=1e-7)
    assert max(w1.gap, w2.gap) < 1e-6


@settings(max_examples=25, deadline=None)
@given(seed=SEEDS)
def test_the_quick_bracket_holds_the_exact_cost(seed: int) -> None:
    first, second = some(seed), some(seed + 1)

    quick, exact = costs.bracketed_w2(first, second), costs.exact_w2(first, second).value

    assert quick.value <= exact * (1 + 1e-4)
    assert exact <= quick.value + quick.gap + 1e-4
    assert quick.value > 0.9 * exact


@settings(max_examples=20, deadline=None)
@given(seed=SEEDS)
def test_costs_are_distances(seed: int) -> None:
    a, b, c = some(seed), some(seed + 1), some(seed + 2)

    for distance in (
        lambda p, q: costs.exact_w1(p, q).value,
        lambda p, q: costs.exact_w2(p, q).value,
        costs.gaussian_w2,
    ):
        assert distance(a, c) <= distance(a, b) + distance(b, c) + 1e-6
        assert distance(a, b) == pytest.approx(distance(b, a), abs=1e-6)
        assert distance(a, a) == pytest.approx(0, abs=1e-5)


@settings(max_examples=20, deadline=None)
@given(seed=SEEDS)
def test_costs_keep_their_order(seed: int) -> None:
    """|Δm| ≤ Gaussian W2 ≤ W2 (Gelbrich 1990); W1 ≤ W2 (Jensen); √3 SW2 ≤ W2."""
    first, second = some(seed), some(seed + 1)
    w2 = costs.exact_w2(first, second).value

    assert np.linalg.norm(first.mean - second.mean) <= costs.gaussian_w2(first, second) + 1e-9
    assert costs.gaussian_w2(first, second) <= w2 + 1e-6
    assert costs.exact_w1(first, second).value <= w2 + 1e-9
    assert np.sqrt(3) * costs.sliced_w2(first, second).value <= w2 * 1.01


def test_a_shifted_cloud_costs_its_shift_by_every_measure() -> None:
    """W_p = |Δm| for a shift, every p, and the Sinkhorn divergence too, at every blur (Feydy et al. 2019)."""
    first = some(3)
    second = cloud(first.colours + np.array([1, 2, 2]), first.weights)

    assert costs.exact_w1(first, second).value == pytest.approx(3, abs=1e-6)
    assert costs.exact_w2(first, second).value == pytest.approx(3, abs=1e-6)
    assert costs.gaussian_w2(first, second) == pytest.approx(3, abs=1e-9)
    for blur in (2.0, 5.0, 50.0):
        assert costs.sinkhorn_divergence(first, second, blur=blur) == pytest.approx(3, abs=2e-3)


def test_sinkhorn_divergence_is_that_of_pot() -> None:
    """Oracle: POT's log-domain solver, OT_ε with ε KL(P | a ⊗ b), own and other terms taken off by half."""
    first, second = some(5), some(6)

    def value(p, q):
        cost = ot.dist(p.colours, q.colours)
        plan = ot.sinkhorn(p.weights, q.weights, cost, reg=50.0, method="sinkhorn_log", stopThr=1e-11, numItermax=20000)
        product = p.weights[:, None] * q.weights[None, :]
        return (plan * cost).sum() + 50.0 * (plan * np.log(np.maximum(plan, 1e-300) / product)).sum()

    expected = np.sqrt(value(first, second) - value(first, first) / 2 - value(second, second) / 2)
    assert costs.sinkhorn_divergence(first, second, blur=5.0) == pytest.approx(expected, rel=1e-3)


def test_sinkhorn_divergence_runs_from_the_full_cost_to_the_shift_of_the_mean() -> None:
    first, second = some(5), some(6)

    assert costs.sinkhorn_divergence(first, second, blur=0.7) == pytest.approx(
        costs.exact_w2(first, second).value, rel=0.02
    )
    assert costs.sinkhorn_divergence(first, second, blur=2000.0) == pytest.approx(
        float(np.linalg.norm(first.mean - second.mean)), rel=0.01
    )


def test_the_standard_error_of_the_sliced_cost_is_one() -> None:
    """Over 60 seeds the deviation of the estimates is near the error that each one states."""
    first, second = some(5), some(9)
    estimates = [costs.sliced_w2(first, second, seed=seed) for seed in range(60)]

    scatter = np.std([estimate.value for estimate in estimates])
    stated = np.sqrt(np.mean([estimate.error**2 for estimate in estimates]))
    assert 0.5 * scatter < stated < 2 * scatter
    assert costs.sliced_w2(first, second, seed=4) == costs.sliced_w2(first, second, seed=4)


@settings(max_examples=30, deadline=None)
@given(seed=SEEDS)
def test_rounding_makes_a_plan_of_anything(seed: int) -> None:
    rng = np.random.default_rng(seed)
    source, target = rng.dirichlet(np.ones(7)), rng.dirichlet(np.ones(5))

    plan = costs.round_to_plan(rng.random((7, 5)) / 20, source, target)

    assert plan.sum(axis=1) == pytest.approx(source, abs=1e-12)
    assert plan.sum(axis=0) == pytest.approx(target, abs=1e-12)
    assert plan.min() >= 0
