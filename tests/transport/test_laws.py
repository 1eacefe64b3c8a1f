"""Laws that every plan obeys, on problems that chance makes up."""

from __future__ import annotations

import numpy as np
import ot
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog
from scipy.stats import wasserstein_distance

from hueferry.errors import HueferryError, InputError, NotConverged
from hueferry.transport.costs import distances, squared_distances, weighted_squared_distances
from hueferry.transport.entropic import self_potential, solve_entropic
from hueferry.transport.exact import solve_exact
from hueferry.transport.one_dimensional import wasserstein_1d
from hueferry.transport.unbalanced import solve_partial

Problem = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]


def problem(seed: int, n: int = 12, m: int = 9) -> Problem:
    rng = np.random.default_rng(seed)
    return rng.random((n, 3)), rng.dirichlet(np.ones(n)), rng.random((m, 3)), rng.dirichlet(np.ones(m))


seeds = st.integers(0, 10_000)


@settings(max_examples=25, derandomize=True, deadline=None)
@given(seeds)
def test_an_exact_plan_is_optimal_by_an_independent_linear_programme(seed: int) -> None:
    x, a, y, b = problem(seed)
    cost = squared_distances(x, y)
    rows = np.kron(np.eye(len(a)), np.ones(len(b)))
    columns = np.kron(np.ones(len(a)), np.eye(len(b)))

    plan = solve_exact(a, b, cost)
    oracle = linprog(cost.ravel(), A_eq=np.vstack([rows, columns]), b_eq=np.concatenate([a, b]), method="highs")

    assert plan.cost == pytest.approx(oracle.fun, rel=1e-9)


@settings(max_examples=25, derandomize=True, deadline=None)
@given(seeds)
def test_exact_plans_prove_themselves(seed: int) -> None:
    """Kantorovich duality and complementary slackness (Villani 2003, theorem 1.3)."""
    x, a, y, b = problem(seed)
    cost = squared_distances(x, y)

    plan = solve_exact(a, b, cost)
    f, g = plan.potentials
    slack = cost - f[:, None] - g[None, :]

    assert slack.min() > -1e-12
    assert np.abs(slack[plan.coupling > 1e-12]).max() < 1e-9
    assert plan.gap < 1e-10
    np.testing.assert_allclose(plan.coupling.sum(axis=1), a, atol=1e-12)
    np.testing.assert_allclose(plan.coupling.sum(axis=0), b, atol=1e-12)


def test_the_gap_bounds_the_error_of_a_solve_cut_short() -> None:
    """A solve cut short either is refused, being no plan yet, or its gap bounds how far it is from the best."""
    open_gaps = 0
    for seed in range(25):
        x, a, y, b = problem(seed, 40, 40)
        cost = squared_distances(x, y)
        best = solve_exact(a, b, cost)
        for pivots in (100, 150, 200, 300):
            try:
                cut = solve_exact(a, b, cost, iterations=pivots)
            except HueferryError:
                continue
            open_gaps += cut.gap > 1e-9
            assert cut.cost - best.cost <= cut.gap + 1e-12
    assert open_gaps > 20


@settings(max_examples=15, derandomize=True, deadline=None)
@given(seeds)
def test_entropy_lies_between_the_plan_and_the_product(seed: int) -> None:
    """ε → 0 gives the exact plan, ε → ∞ the product coupling, and the linear cost rises in between (Cuturi 2013)."""
    x, a, y, b = problem(seed)
    cost = squared_distances(x, y)
    exact = solve_exact(a, b, cost)

    plans = [solve_entropic(a, b, cost, epsilon=e, tolerance=1e-9) for e in (2e-3, 1e-2, 0.1, 1.0, 1e3)]
    values = [plan.cost for plan in plans]

    assert exact.cost <= values[0] + 1e-9
    assert values[0] == pytest.approx(exact.cost, abs=2e-3 * np.log(len(a) * len(b)))
    assert values == sorted(values)
    np.testing.assert_allclose(plans[-1].coupling, np.outer(a, b), atol=1e-3)
    assert all(plan.cost - exact.cost <= plan.gap + 1e-9 for plan in plans)


@settings(max_examples=10, derandomize=True, deadline=None)
@given(seeds, st.sampled_from([1e-2, 0.1, 1.0]))
def test_entropic_plans_agree_with_another_solver(seed: int, epsilon: float) -> None:
    x, a, y, b = problem(seed)
    cost = squared_distances(x, y)

    ours = solve_entropic(a, b, cost, epsilon=epsilon, tolerance=1e-11).coupling
    theirs = ot.sinkhorn(a, b, cost, epsilon, method="sinkhorn_log", stopThr=1e-12, numItermax=50_000)

    np.testing.assert_allclose(ours, theirs, atol=1e-8)


@settings(max_examples=30, derandomize=True, deadline=None)
@given(seeds)
def test_a_line_agrees_with_scipy_and_with_the_exact_plan(seed: int) -> None:
    x, a, y, b = problem(seed)

    assert wasserstein_1d(x[:, 0], a, y[:, 0], b, power=1) == pytest.approx(
        wasserstein_distance(x[:, 0], y[:, 0], a, b), rel=1e-10
    )
    exact = solve_exact(a, b, squared_distances(x[:, :1], y[:, :1]))
    assert wasserstein_1d(x[:, 0], a, y[:, 0], b) == pytest.approx(exact.cost, rel=1e-9)


@settings(max_examples=15, derandomize=True, deadline=None)
@given(seeds)
def test_wasserstein_distances_are_distances(seed: int) -> None:
    x, a, y, b = problem(seed)
    z, c = problem(seed + 1)[:2]

    def w1(p: np.ndarray, u: np.ndarray, q: np.ndarray, v: np.ndarray) -> float:
        return solve_exact(u, v, distances(p, q)).cost

    def w2(p: np.ndarray, u: np.ndarray, q: np.ndarray, v: np.ndarray) -> float:
        return solve_exact(u, v, squared_distances(p, q)).cost ** 0.5

    for distance in (w1, w2):
        assert distance(x, a, y, b) == pytest.approx(distance(y, b, x, a), rel=1e-9)
        assert distance(x, a, z, c) <= distance(x, a, y, b) + distance(y, b, z, c) + 1e-9
        assert distance(x, a, x, a) == pytest.approx(0, abs=1e-7)
    assert w1(x, a, y, b) <= w2(x, a, y, b) + 1e-12


def test_a_metric_weighs_its_directions() -> None:
    """The weighted norm is the plain one of colours that the metric's root has stretched."""
    x, _, y, _ = problem(3)
    metric = np.diag([4.0, 1.0, 0.25])

    np.testing.assert_allclose(
        weighted_squared_distances(x, y, metric), squared_distances(x * [2, 1, 0.5], y * [2, 1, 0.5]), atol=1e-12
    )


@settings(max_examples=10, derandomize=True, deadline=None)
@given(seeds, st.floats(0.1, 1.0))
def test_a_part_of_the_mass_costs_no_more_than_its_share(seed: int, share: float) -> None:
    x, a, y, b = problem(seed)
    cost = squared_distances(x, y)

    part = solve_partial(a, b, cost, mass=share)

    assert part.mass == pytest.approx(share, abs=1e-9)
    assert part.value <= share * solve_exact(a, b, cost).cost + 1e-9
    assert (part.coupling.sum(axis=1) <= a + 1e-9).all()
    assert (part.coupling.sum(axis=0) <= b + 1e-9).all()


def test_the_potential_to_oneself_is_that_of_the_full_problem() -> None:
    x, a, _, _ = problem(5, 30)
    cost = squared_distances(x, x)

    potential = self_potential(a, cost, epsilon=0.05, rounds=200)
    coupling = a[:, None] * a[None, :] * np.exp((potential[:, None] + potential[None, :] - cost) / 0.05)

    np.testing.assert_allclose(coupling.sum(axis=1), a, atol=1e-5)


def _nasty(rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray, np.ndarray, float]:
    n, m = (int(k) for k in rng.integers(1, 12, 2))
    x, y = rng.random((n, 3)), rng.random((m, 3))
    if rng.random() < 0.3:
        x[:] = x[0]
    if rng.random() < 0.2:
        y[: min(n, m)] = x[: min(n, m)]
    a, b = rng.dirichlet(np.full(n, 0.3)), rng.dirichlet(np.full(m, 0.3))
    if rng.random() < 0.3 and n > 1:
        a[0] = 0.0
        a /= a.sum()
    cost = squared_distances(x, y) * 10.0 ** rng.integers(-3, 4)
    if rng.random() < 0.15:
        cost[0, 0] = rng.choice([np.nan, np.inf, -np.inf])
    if rng.random() < 0.1:
        a = a * rng.choice([0.5, np.nan, -1.0])
    return a, b, cost, float(10.0 ** rng.uniform(-6, 0))


def test_a_thousand_nasty_problems_give_a_valid_plan_or_a_typed_error() -> None:
    """Warnings are errors in this suite, so none escapes either."""
    rng = np.random.default_rng(11)
    valid = 0
    for _ in range(1000):
        a, b, cost, epsilon = _nasty(rng)
        for solve in (solve_exact, lambda *p, e=epsilon: solve_entropic(*p, epsilon=e, tolerance=5e-5, iterations=400)):
            try:
                plan = solve(a, b, cost)
            except (InputError, NotConverged):
                continue
            valid += 1
            assert np.isfinite(plan.coupling).all()
            assert np.isfinite(plan.cost)
            assert plan.misplaced < 2e-4
            assert plan.coupling.min() >= 0
    assert valid > 900


@pytest.mark.parametrize(
    ("weights", "costs", "complaint"),
    [
        (np.array([0.5, 0.5]), np.zeros((3, 2)), "do not fit"),
        (np.array([0.5, np.nan]), np.zeros((2, 2)), "must be finite"),
        (np.array([0.9, 0.9]), np.zeros((2, 2)), "must sum to 1"),
        (np.array([0.5, 0.5]), np.full((2, 2), np.inf), "costs must be finite"),
    ],
)
def test_what_is_no_problem_is_refused(weights: np.ndarray, costs: np.ndarray, complaint: str) -> None:
    with pytest.raises(InputError, match=complaint):
        solve_exact(weights, np.array([0.5, 0.5]), costs)


def test_a_blur_of_nothing_is_refused() -> None:
    with pytest.raises(InputError, match="must be positive"):
        solve_entropic(np.array([1.0]), np.array([1.0]), np.zeros((1, 1)), epsilon=0.0)


def test_giving_up_is_said_with_its_numbers() -> None:
    x, a, y, b = problem(7, 60, 60)

    with pytest.raises(NotConverged, match="of the mass misplaced after"):
        solve_entropic(a, b, squared_distances(x, y), epsilon=1e-4, tolerance=1e-12, iterations=40)
