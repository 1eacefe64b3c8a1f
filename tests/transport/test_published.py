"""Transport against textbooks, papers and closed forms; each value names its source."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.transport.barycentre import bures_barycentre
from hueferry.transport.costs import squared_distances
from hueferry.transport.entropic import solve_entropic
from hueferry.transport.exact import solve_exact
from hueferry.transport.gaussian import bures_squared, gaussian_map, gaussian_w2_squared
from hueferry.transport.mixture import Mixture, solve_mixture
from hueferry.transport.one_dimensional import wasserstein_1d
from hueferry.transport.sliced import sliced_squared
from hueferry.transport.unbalanced import solve_unbalanced

A = np.asarray


def even(values: list[float]) -> tuple[np.ndarray, np.ndarray]:
    return A(values, float), np.full(len(values), 1 / len(values))


# --- on a line -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("source", "target", "w1", "w2_squared"),
    [
        (even([0, 1, 3]), even([5, 6, 8]), 5, 25),  # example of scipy.stats.wasserstein_distance
        ((A([0.0, 1]), A([0.75, 0.25])), (A([0.0, 1]), A([0.5, 0.5])), 0.25, 0.25),  # the same
        (
            (A([3.4, 3.9, 7.5, 7.8]), A([1.4, 0.9, 3.1, 7.2]) / 12.6),
            (A([4.5, 1.4]), A([3.2, 3.5]) / 6.7),
            4.078133143804786,
            19.08963752665245,
        ),  # the same
        (even([0, 1, 3]), even([1, 5, 9]), 11 / 3, 53 / 3),  # by hand: sorted to sorted
    ],
)
def test_one_dimension_by_hand_and_by_scipys_examples(
    source: tuple[np.ndarray, np.ndarray], target: tuple[np.ndarray, np.ndarray], w1: float, w2_squared: float
) -> None:
    assert wasserstein_1d(*source, *target, power=1) == pytest.approx(w1, rel=1e-12)
    assert wasserstein_1d(*source, *target, power=2) == pytest.approx(w2_squared, rel=1e-12)


def test_uniform_laws_of_two_lengths() -> None:
    """By hand: U(0, 1) to U(0, 2) has W1 = 1/2 and W2² = 1/3; midpoints of n cells are exact to 1/n²."""
    short, shares = (np.arange(4000) + 0.5) / 4000, np.full(4000, 1 / 4000)

    assert wasserstein_1d(short, shares, 2 * short, shares, power=1) == pytest.approx(0.5, abs=1e-7)
    assert wasserstein_1d(short, shares, 2 * short, shares) == pytest.approx(1 / 3, abs=1e-7)


# --- transportation problems -----------------------------------------------------------------------------------------

HITCHCOCK = A([[10, 5, 6, 7], [8, 2, 7, 6], [9, 3, 4, 8]], float)
PT_COSTS = A([[464, 513, 654, 867], [352, 416, 690, 791], [995, 682, 388, 685]], float)
PT_SUPPLY, PT_DEMAND = A([75, 125, 100.0]) / 300, A([80, 65, 70, 85.0]) / 300


def test_exact_reproduces_hitchcocks_problem() -> None:
    """Hitchcock (1941), data as usually reprinted, from memory: 535; not unique, so the cost alone counts."""
    plan = solve_exact(A([25, 25, 50.0]) / 100, A([15, 20, 30, 35.0]) / 100, HITCHCOCK)

    assert 100 * plan.cost == pytest.approx(535, rel=1e-12)
    assert plan.gap < 1e-9


def test_exact_reproduces_the_cannery_problem_with_its_proof() -> None:
    """Hillier & Lieberman, Introduction to Operations Research, P&T Company: 152 535, a unique plan, and its duals."""
    plan = solve_exact(PT_SUPPLY, PT_DEMAND, PT_COSTS)
    f, g = plan.potentials
    trucks = A([[0, 20, 0, 55], [80, 45, 0, 0], [0, 0, 70, 30.0]])
    reduced = A([[15, 0, 84, 0], [0, 0, 217, 21], [728, 351, 0, 0.0]])

    assert 300 * plan.cost == pytest.approx(152_535, rel=1e-12)
    np.testing.assert_allclose(300 * plan.coupling, trucks, atol=1e-9)
    np.testing.assert_allclose(f - f[0], [0, -97, -182], atol=1e-8)
    np.testing.assert_allclose(PT_COSTS - f[:, None] - g[None, :], reduced, atol=1e-8)
    assert plan.gap < 1e-9


def test_exact_reproduces_dantzigs_canneries() -> None:
    """Dantzig (1963), Linear Programming and Extensions, section 3.3: 153.675; a dummy demand of 50."""
    freight = 90 * A([[2.5, 1.7, 1.8, 0], [2.5, 1.8, 1.4, 0]]) / 1000

    plan = solve_exact(A([350, 600.0]) / 950, A([325, 300, 275, 50.0]) / 950, freight)

    assert 950 * plan.cost == pytest.approx(153.675, rel=1e-12)


# --- normal distributions --------------------------------------------------------------------------------------------

GENERAL = (A([[2, 0.5], [0.5, 1]]), A([[1, -0.3], [-0.3, 3]]))


@pytest.mark.parametrize(
    ("first", "second", "squared", "matrix"),
    [
        (A([[5, 4], [4, 5.0]]), A([[5, -4], [-4, 5.0]]), 8.0, A([[5 / 3, -4 / 3], [-4 / 3, 5 / 3]])),
        (
            np.diag([1.0, 4]),
            A([[2, 1], [1, 2.0]]),
            9 - 2 * np.sqrt(10 + 2 * np.sqrt(12)),
            A([[1.3280466636, 0.2430494082], [0.2430494082, 0.6965857781]]),
        ),
        (*GENERAL, 0.9293118550, A([[0.7542862120, -0.3112527175], [-0.3112527175, 1.8380243661]])),
        (
            A([[0.04, 0.03, 0.02], [0.03, 0.05, 0.03], [0.02, 0.03, 0.06]]),
            A([[0.09, 0.02, -0.01], [0.02, 0.03, 0.01], [-0.01, 0.01, 0.02]]),
            0.0338901882,
            A(
                [
                    [1.7153507432, -0.1599099913, -0.3094307768],
                    [-0.1599099913, 0.8451842566, 0.0297096945],
                    [-0.3094307768, 0.0297096945, 0.6228485368],
                ]
            ),
        ),
    ],
)
def test_bures_distance_and_map(first: np.ndarray, second: np.ndarray, squared: float, matrix: np.ndarray) -> None:
    """Formula: Dowson & Landau (1982), Olkin & Pukelsheim (1982); values by POT and an independent square root."""
    ours = gaussian_map(first, second)

    assert bures_squared(first, second) == pytest.approx(squared, abs=1e-9)
    np.testing.assert_allclose(ours, matrix, atol=1e-9)
    np.testing.assert_allclose(ours @ first @ ours, second, atol=1e-12)


def test_the_gaussian_map_is_cheaper_than_the_maps_it_is_mistaken_for() -> None:
    """The Cholesky map and S2^1/2 S1^-1/2 also push one covariance to the other, and cost 1.1923 and 0.9332."""
    first, second = GENERAL
    cholesky = np.linalg.cholesky(second) @ np.linalg.inv(np.linalg.cholesky(first))

    def cost(matrix: np.ndarray) -> float:
        return float(np.trace((matrix - np.eye(2)) @ first @ (matrix - np.eye(2)).T))

    assert cost(gaussian_map(first, second)) == pytest.approx(0.9293118550, abs=1e-9)
    assert cost(cholesky) == pytest.approx(1.1923102302, abs=1e-9)
    values, vectors = np.linalg.eigh(first)
    other = np.linalg.eigh(second)
    roots = (other[1] * np.sqrt(other[0])) @ other[1].T @ (vectors / np.sqrt(values)) @ vectors.T
    assert cost(roots) == pytest.approx(0.9331709372, abs=1e-9)
    diagonal = np.diag(np.sqrt(np.diag(second) / np.diag(first)))
    assert (diagonal @ first @ diagonal)[0, 1] == pytest.approx(0.6123724357, abs=1e-9)  # not the −0.3 that is wanted


def test_gaussian_w2_with_means() -> None:
    assert gaussian_w2_squared(A([0.0, 0]), GENERAL[0], A([1.0, 2]), GENERAL[1]) == pytest.approx(
        5.9293118550, abs=1e-9
    )


@pytest.mark.parametrize("spread", [0.1, 1.0, 7.0])
def test_equal_normals_keep_their_distance_whatever_the_spread(spread: float) -> None:
    """By hand: W2 of two normals of equal covariance is the distance of their means, 3 for (1, 2, 2)."""
    same = spread**2 * np.eye(3)

    assert gaussian_w2_squared(np.zeros(3), same, A([1.0, 2, 2]), same) == pytest.approx(9, abs=1e-9)


# --- entropy ---------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("epsilon", "linear", "regularised"),
    [
        (0.001, 0.5084500006, 0.5092098669),
        (0.01, 0.5096064564, 0.5153616642),
        (0.1, 0.5196519267, 0.5502031826),
        (1, 0.6015661808, 0.6145657209),
        (10, 0.6252468764, 0.6266160737),
        (1000, 0.6279600298, 0.6279737648),
    ],
)
def test_entropic_plans_of_the_cannery_problem(epsilon: float, linear: float, regularised: float) -> None:
    """Formula: Cuturi (2013); values by POT, C / 1000 and weights / 300."""
    plan = solve_entropic(PT_SUPPLY, PT_DEMAND, PT_COSTS / 1000, epsilon=epsilon, tolerance=1e-11)
    f, g = plan.potentials

    assert plan.cost == pytest.approx(linear, abs=1e-8)
    assert PT_SUPPLY @ f + PT_DEMAND @ g == pytest.approx(regularised, abs=1e-8)


@pytest.mark.parametrize(("epsilon", "corner"), [(0.5, 0.4403985390), (1, 0.3655292893), (10, 0.2624895937)])
def test_the_two_by_two_plan_in_closed_form(epsilon: float, corner: float) -> None:
    """By hand: P11 = ½ / (1 + exp(−1/ε))."""
    plan = solve_entropic(A([0.5, 0.5]), A([0.5, 0.5]), A([[0, 1.0], [1, 0]]), epsilon=epsilon, tolerance=1e-12)

    assert plan.coupling[0, 0] == pytest.approx(corner, abs=1e-9)


@pytest.mark.parametrize(
    ("epsilon", "linear", "value"),
    [
        (0.1, 10.0496875122, 10.2347564686),
        (0.5, 10.2421951145, 10.7776703453),
        (2, 10.8768943744, 11.8175080165),
        (10, 12.5968757626, 13.2533871664),
        (1000, 13.9840002560, 13.9920000640),
    ],
)
def test_entropic_transport_of_normals(epsilon: float, linear: float, value: float) -> None:
    """N(0, 1) to N(3, 2): Janati, Muzellec, Peyré & Cuturi (2020), theorem 1; a grid agrees to 1e-5."""
    x, y = np.linspace(-7, 7, 301), np.linspace(-11, 17, 301)
    a, b = np.exp(-(x**2) / 2), np.exp(-(((y - 3) / 2) ** 2) / 2)
    a, b = a / a.sum(), b / b.sum()

    plan = solve_entropic(a, b, (x[:, None] - y[None, :]) ** 2, epsilon=epsilon, tolerance=1e-10)
    f, g = plan.potentials
    images = plan.coupling @ y / a

    assert plan.cost == pytest.approx(linear, abs=1e-4)
    assert a @ f + b @ g == pytest.approx(value, abs=1e-4)
    # The barycentric map is 3 + c x with c = (√(ε²/4 + 16) − ε/2) / 2: it shrinks the palette.
    slope = (np.sqrt(epsilon**2 / 4 + 16) - epsilon / 2) / 2
    np.testing.assert_allclose(images[100:200], 3 + slope * x[100:200], atol=1e-3)


# --- lines, barycentres, mixtures, loose marginals -------------------------------------------------------------------


def test_sliced_distance_of_normals() -> None:
    """d = 3, spreads 1 and 2, shift (1, 2, 2): SW2² = (1−2)² + 9/3 = 4, by hand; sampling 3 %."""
    rng = np.random.default_rng(1)
    first, second = rng.standard_normal((20_000, 3)), 2 * rng.standard_normal((20_000, 3)) + A([1, 2, 2])
    shares = np.full(20_000, 1 / 20_000)

    estimate = sliced_squared(first, shares, second, shares, directions=200)

    assert estimate.squared == pytest.approx(4.0, rel=0.03)
    assert estimate.error < 0.05


def test_barycentre_of_commuting_normals() -> None:
    """(Σ w S^1/2)² = 4 I where the Euclidean mean would be 5 I (Agueh & Carlier 2011)."""
    turned = [A([[5, 4], [4, 5.0]]), A([[5, -4], [-4, 5.0]])]

    found = bures_barycentre([np.zeros(2)] * 2, turned, A([0.5, 0.5]))

    np.testing.assert_allclose(found.covariance, 4 * np.eye(2), atol=1e-9)


def test_barycentre_of_two_is_the_midpoint() -> None:
    """McCann's midpoint ((I + A) / 2) S1 ((I + A) / 2)."""
    found = bures_barycentre([A([0.0, 0]), A([1.0, 2])], list(GENERAL), A([0.5, 0.5]))

    np.testing.assert_allclose(
        found.covariance, [[1.4264730326, 0.1405992841], [0.1405992841, 1.8411990037]], atol=1e-9
    )
    np.testing.assert_allclose(found.mean, [0.5, 1.0])


def test_barycentre_of_three() -> None:
    """Fixed point of Alvarez-Esteban et al. (2016); value by POT's bures_wasserstein_barycenter."""
    means = [A([0.0, 0]), A([1.0, 2]), A([3.0, -1])]

    found = bures_barycentre(means, [*GENERAL, A([[4, 1], [1, 0.5]])], A([0.5, 0.3, 0.2]))

    np.testing.assert_allclose(
        found.covariance, [[1.9444048523, 0.3985548546], [0.3985548546, 1.2991228487]], atol=1e-9
    )
    np.testing.assert_allclose(found.mean, [0.9, 0.4])
    assert found.residual < 1e-12


def test_mixtures_are_carried_component_by_component() -> None:
    """Delon & Desolneux (2020): component costs [[1, 36], [9.25, 4.25]], plan [[.3, .2], [0, .5]], MW2² = 9.625."""
    first = Mixture(A([0.5, 0.5]), A([[0.0], [4]]), A([[[1.0]], [[0.25]]]))
    second = Mixture(A([0.3, 0.7]), A([[1.0], [6]]), A([[[1.0]], [[1.0]]]))

    plan = solve_mixture(first, second)

    assert plan.cost == pytest.approx(9.625, abs=1e-9)
    np.testing.assert_allclose(plan.coupling, [[0.3, 0.2], [0, 0.5]], atol=1e-12)


@pytest.mark.parametrize(
    ("a", "b", "cost", "penalty", "epsilon", "mass", "value"),
    [(2, 0.5, 1, 1, 0.1, 0.6211451576, 1.2955951690), (1, 1, 4, 1, 0.5, 0.2018965180, 1.9952587050)],
)
def test_two_points_with_loose_marginals(
    a: float, b: float, cost: float, penalty: float, epsilon: float, mass: float, value: float
) -> None:
    """m = (ab)^((ρ+ε)/(2ρ+ε)) exp(−c/(2ρ+ε)): Chizat et al. (2018), by hand; POT agrees."""
    plan = solve_unbalanced(A([a]), A([b]), A([[cost]], dtype=float), penalty=penalty, epsilon=epsilon)

    assert plan.mass == pytest.approx(mass, abs=1e-9)
    assert plan.value == pytest.approx(value, abs=1e-9)


@pytest.mark.parametrize(("penalty", "crossing"), [(0.90, 0.0), (0.92, 0.0039095), (1.0, 0.0330990), (10.0, 0.3587204)])
def test_proportions_are_left_alone_below_the_threshold(penalty: float, crossing: float) -> None:
    """(½, ½) to (.9, .1) at squared distance 1: nothing crosses while ρ < 1/ln 3 (own derivation, POT agrees)."""
    plan = solve_unbalanced(
        A([0.5, 0.5]), A([0.9, 0.1]), A([[0, 1.0], [1, 0]]), penalty=penalty, epsilon=1e-3, tolerance=1e-8
    )

    assert plan.coupling[1, 0] == pytest.approx(crossing, abs=2e-3)


def test_squared_distances_by_hand() -> None:
    assert squared_distances(A([[0.0, 0, 0]]), A([[1.0, 2, 2]]))[0, 0] == pytest.approx(9)


# --- more closed forms on grids --------------------------------------------------------------------------------------


def normal_on(points: np.ndarray, mean: float, spread: float) -> np.ndarray:
    mass = np.exp(-(((points - mean) / spread) ** 2) / 2)
    return mass / mass.sum()


@pytest.mark.parametrize(
    ("mean", "spread", "w1", "w2_squared"),
    [(0, 2, 0.7978845608, 1), (1, 2, 1.1666309412, 2), (3, 2, None, 10)],
)
def test_normals_on_a_line(mean: float, spread: float, w1: float | None, w2_squared: float) -> None:
    """N(0, 1) to N(m, s): W2² = m² + (s − 1)²; W1 = E|m + (s − 1) Z| (quadrature). A fine grid is good to 1e-4."""
    x = np.linspace(-9, 9, 6001)
    y = mean + spread * x

    assert wasserstein_1d(x, normal_on(x, 0, 1), y, normal_on(y, mean, spread)) == pytest.approx(w2_squared, abs=1e-4)
    if w1 is not None:
        ours = wasserstein_1d(x, normal_on(x, 0, 1), y, normal_on(y, mean, spread), power=1)
        assert ours == pytest.approx(w1, abs=1e-4)


def test_exponential_laws_of_two_rates() -> None:
    """By hand: Exp(1) to Exp(2) has W1 = 1/2 and W2² = 1/2; quantiles on a grid of levels."""
    levels = (np.arange(40_000) + 0.5) / 40_000
    shares, slow = np.full(40_000, 1 / 40_000), -np.log1p(-levels)

    assert wasserstein_1d(slow, shares, slow / 2, shares, power=1) == pytest.approx(0.5, abs=1e-4)
    assert wasserstein_1d(slow, shares, slow / 2, shares) == pytest.approx(0.5, abs=1e-3)


def entropic_value(x: np.ndarray, a: np.ndarray, y: np.ndarray, b: np.ndarray, epsilon: float) -> float:
    plan = solve_entropic(a, b, (x[:, None] - y[None, :]) ** 2, epsilon=epsilon, tolerance=1e-9)
    f, g = plan.potentials
    return float(a @ f + b @ g)


@pytest.mark.parametrize(("epsilon", "divergence"), [(0.5, 9.9980546189), (2, 9.9705794128), (1e6, 9.0000090)])
def test_the_sinkhorn_divergence_of_normals(epsilon: float, divergence: float) -> None:
    """S_ε(N(0, 1), N(3, 2)): Feydy et al. (2019) with the closed form of Janati et al. (2020)."""
    x, y = np.linspace(-7, 7, 301), np.linspace(-11, 17, 301)
    a, b = normal_on(x, 0, 1), normal_on(y, 3, 2)

    across = entropic_value(x, a, y, b, epsilon)
    ours = across - entropic_value(x, a, x, a, epsilon) / 2 - entropic_value(y, b, y, b, epsilon) / 2

    assert ours == pytest.approx(divergence, abs=2e-4)


def test_the_sinkhorn_divergence_of_a_shift_is_its_square_whatever_the_blur() -> None:
    """Equal shapes: S_ε = |shift|² for every ε, by hand."""
    x = np.linspace(-6, 6, 121)
    a = normal_on(x, 0, 1)

    for epsilon in (0.1, 1.0, 10.0):
        across, own = entropic_value(x, a, x + 3, a, epsilon), entropic_value(x, a, x, a, epsilon)
        assert across - own == pytest.approx(9, abs=1e-6)


@pytest.mark.parametrize(("epsilon", "linear", "value"), [(1.0, 6.8458657773, 8.1132595664), (2.0, None, 9.0762228901)])
def test_entropic_transport_of_normals_in_the_plane(epsilon: float, linear: float | None, value: float) -> None:
    """The general pair with shift (1, 2): ⟨P, C⟩ and OT_ε (Janati et al. 2020); a coarse grid is good to 5e-3."""
    axis = np.linspace(-4.2, 4.2, 25)
    grid = np.stack(np.meshgrid(axis, axis, indexing="ij"), axis=-1).reshape(-1, 2)

    def cloud(covariance: np.ndarray, mean: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        mass = np.exp(-0.5 * (grid**2).sum(axis=1))
        return grid @ np.linalg.cholesky(covariance).T + mean, mass / mass.sum()

    (x, a), (y, b) = cloud(GENERAL[0], np.zeros(2)), cloud(GENERAL[1], A([1.0, 2]))
    plan = solve_entropic(a, b, squared_distances(x, y), epsilon=epsilon, tolerance=1e-8)
    f, g = plan.potentials

    assert a @ f + b @ g == pytest.approx(value, abs=5e-3)
    if linear is not None:
        assert plan.cost == pytest.approx(linear, abs=5e-3)


@pytest.mark.parametrize(
    ("first", "second", "shift", "squared"),
    [
        (np.eye(2), 9 * np.eye(2), (1, 2), 6.5),
        (GENERAL[0], 4 * GENERAL[0], (1, 2), 4.0),
        (GENERAL[0], GENERAL[1], (1, 2), 2.7475870474),
    ],
)
def test_sliced_distances_in_the_plane(
    first: np.ndarray, second: np.ndarray, shift: tuple[float, float], squared: float
) -> None:
    """Isotropic and proportional covariances by hand, the general pair by quadrature; sampling good to 3 %."""
    normal = np.random.default_rng(3).standard_normal((20_000, 2))
    shares = np.full(20_000, 1 / 20_000)

    estimate = sliced_squared(
        normal @ np.linalg.cholesky(first).T,
        shares,
        normal[::-1] @ np.linalg.cholesky(second).T + A(shift),
        shares,
        directions=64,
    )

    assert estimate.squared == pytest.approx(squared, rel=0.03)


@pytest.mark.parametrize(
    ("masses", "shift", "variances", "epsilon", "penalty", "mass", "value"),
    [
        ((1, 1), 3, (1, 4), 2.0, 2, 0.4606369751, 3.2361781493),
        ((1.1, 1), 1, (1, 0.5), 0.5, 5, 0.9341935538, 1.2409676852),
        ((2, 0.5), 2, (1, 1), 1.0, 1, 0.4815941202, 2.0552176394),
    ],
)
def test_loose_marginals_of_normals(
    masses: tuple[float, float],
    shift: float,
    variances: tuple[float, float],
    epsilon: float,
    penalty: float,
    mass: float,
    value: float,
) -> None:
    """Janati et al. (2020), theorem 3: mass of the plan and value; a grid agrees to 1e-4."""
    x, y = np.linspace(-7, 7, 201) * variances[0] ** 0.5, shift + np.linspace(-7, 7, 201) * variances[1] ** 0.5
    a = masses[0] * normal_on(x, 0, variances[0] ** 0.5)
    b = masses[1] * normal_on(y, shift, variances[1] ** 0.5)

    plan = solve_unbalanced(a, b, (x[:, None] - y[None, :]) ** 2, penalty=penalty, epsilon=epsilon)

    assert plan.mass == pytest.approx(mass, abs=1e-4)
    assert plan.value == pytest.approx(value, abs=1e-3)
    # gamma (mA + mB) + eps mA mB − (eps + 2 gamma) mass, the identity of the same theorem
    identity = penalty * sum(masses) + epsilon * masses[0] * masses[1] - (epsilon + 2 * penalty) * plan.mass
    assert plan.value == pytest.approx(identity, abs=1e-6)
    if masses == (1, 1):  # the plan's means are 3/7 and 9/7 there, between the normals'
        rows, columns = plan.coupling.sum(axis=1), plan.coupling.sum(axis=0)
        assert rows @ x / plan.mass == pytest.approx(3 / 7, abs=1e-4)
        assert columns @ y / plan.mass == pytest.approx(9 / 7, abs=1e-4)


@pytest.mark.parametrize(
    ("a", "b", "cost", "penalty", "mass"),
    [(2, 0.5, 1, 1, 0.6065306597), (1, 1, 4, 1, 0.1353352832), (1, 3, 0, 2, 3**0.5)],
)
def test_two_points_without_blur(a: float, b: float, cost: float, penalty: float, mass: float) -> None:
    """m = √(ab) exp(−c / 2ρ) at ε = 0 (Chizat et al. 2018), reached as ε falls."""
    plan = solve_unbalanced(A([a]), A([b]), A([[cost]], dtype=float), penalty=penalty, epsilon=1e-3, tolerance=1e-8)

    assert plan.mass == pytest.approx(mass, rel=2e-3)


def test_matching_on_a_line_is_what_scikit_image_does() -> None:
    """match_histograms of [10, 20, 30, 40] with [100, 110, 150, 200] gives the latter (scikit-image)."""
    from hueferry.maps.chain import rising_between

    x, y, shares = A([10.0, 20, 30, 40]), A([100.0, 110, 150, 200]), np.full(4, 0.25)

    np.testing.assert_allclose(rising_between(x, shares, y, shares, knots=4, steepest=1e6)(x), y, atol=1e-9)


def test_the_self_term_is_what_makes_entropic_transport_biased() -> None:
    """OT_ε(N(0, 1), N(0, 1)) at ε = 2 is 1.2451438476 and not 0 (Janati et al. 2020): the trap of the bare value."""
    x = np.linspace(-7, 7, 301)

    assert entropic_value(x, normal_on(x, 0, 1), x, normal_on(x, 0, 1), 2.0) == pytest.approx(1.2451438476, abs=1e-4)


def test_half_the_cost_is_half_the_blur() -> None:
    """With ½|x − y|² and ε/2 the plan is the same: the convention of Pooladian & Niles-Weed (2021)."""
    x, y = A([0.0, 1.0, 2.5]), A([0.5, 2.0])
    a, b, cost = np.full(3, 1 / 3), A([0.4, 0.6]), (x[:, None] - y[None, :]) ** 2

    whole = solve_entropic(a, b, cost, epsilon=0.6, tolerance=1e-12).coupling
    half = solve_entropic(a, b, cost / 2, epsilon=0.3, tolerance=1e-12).coupling

    np.testing.assert_allclose(whole, half, atol=1e-10)


def test_the_anti_monotone_pairing_costs_more() -> None:
    """{0, 1, 3} to {1, 5, 9}: sorted costs 53/3, reversed 101/3, by hand."""
    x, y = A([0.0, 1, 3]), A([1.0, 5, 9])

    assert ((x - y) ** 2).mean() == pytest.approx(53 / 3)
    assert ((x - y[::-1]) ** 2).mean() == pytest.approx(101 / 3)
    assert wasserstein_1d(x, np.full(3, 1 / 3), y, np.full(3, 1 / 3)) == pytest.approx(53 / 3)


def test_mixture_transport_is_never_below_the_distance_of_the_mixtures() -> None:
    """MW2² = 9.625 ≥ W2² = 6.93203 of the same two mixtures (Delon & Desolneux 2020; POT on a grid)."""
    x = np.linspace(-8, 12, 4001)

    def mixed(parts: list[tuple[float, float, float]]) -> np.ndarray:
        mass = sum(w / s * np.exp(-(((x - m) / s) ** 2) / 2) for w, m, s in parts)
        return mass / mass.sum()

    first, second = mixed([(0.5, 0, 1), (0.5, 4, 0.5)]), mixed([(0.3, 1, 1), (0.7, 6, 1)])

    assert wasserstein_1d(x, first, x, second) == pytest.approx(6.93203, abs=1e-3)


def test_unmeasurable_problems_are_refused_everywhere() -> None:
    from hueferry.errors import InputError
    from hueferry.transport.entropic import entropic_potentials
    from hueferry.transport.points import potentials_between

    two, nan = A([0.5, 0.5]), A([np.nan, 0.5])
    with pytest.raises(InputError):
        wasserstein_1d(A([0.0, 1]), np.zeros(2), A([0.0, 1]), two)
    with pytest.raises(InputError):
        wasserstein_1d(A([0.0, 1e200]), two, A([0.0, 1]), two)
    with pytest.raises(InputError):
        solve_unbalanced(A([np.inf]), A([1.0]), A([[1.0]]), penalty=1, epsilon=1)
    with pytest.raises(InputError):
        entropic_potentials(nan, two, np.zeros((2, 2)), epsilon=1.0)
    with pytest.raises(InputError):
        potentials_between(A([[np.nan, 0, 0]]), A([1.0]), A([[0.0, 0, 0]]), A([1.0]), epsilon=1.0)


def test_dantzigs_canneries_prove_their_cost() -> None:
    """The duals of the demands are .225, .153 and .126 k$ a case where both plants' are 0 (GAMS library, TRNSPORT)."""
    freight = 90 * A([[2.5, 1.7, 1.8, 0], [2.5, 1.8, 1.4, 0]]) / 1000
    supply, demand = A([350, 600.0]) / 950, A([325, 300, 275, 50.0]) / 950
    g = A([0.225, 0.153, 0.126, 0.0])

    assert (freight - g >= -1e-12).all()
    assert 950 * float(demand @ g) == pytest.approx(153.675, rel=1e-12)
    assert 950 * solve_exact(supply, demand, freight).cost == pytest.approx(950 * float(demand @ g), rel=1e-12)


@pytest.mark.parametrize(("epsilon", "distance"), [(0.1, 0.1078), (1, 0.02765), (10, 2.93e-3), (1000, 2.94e-5)])
def test_the_plan_nears_the_product_as_blur_grows(epsilon: float, distance: float) -> None:
    """max |P − a ⊗ b| of the cannery problem (Cuturi 2013; POT)."""
    plan = solve_entropic(PT_SUPPLY, PT_DEMAND, PT_COSTS / 1000, epsilon=epsilon, tolerance=1e-11)

    found = np.abs(plan.coupling - np.outer(PT_SUPPLY, PT_DEMAND)).max()

    assert found == pytest.approx(distance, rel=2e-3)


def test_entropy_bounds_what_blur_adds() -> None:
    """OT ≤ ⟨P, C⟩ and OT ≤ OT_ε ≤ OT + ε min(H(a), H(b)), with H(a) = 1.0775563271 and H(b) = 1.3807247178."""
    entropy = -float((PT_SUPPLY * np.log(PT_SUPPLY)).sum()), -float((PT_DEMAND * np.log(PT_DEMAND)).sum())
    exact = solve_exact(PT_SUPPLY, PT_DEMAND, PT_COSTS / 1000).cost

    assert entropy == pytest.approx((1.0775563271, 1.3807247178), abs=1e-9)
    for epsilon in (0.01, 0.1, 1.0):
        plan = solve_entropic(PT_SUPPLY, PT_DEMAND, PT_COSTS / 1000, epsilon=epsilon, tolerance=1e-10)
        value = float(PT_SUPPLY @ plan.potentials[0] + PT_DEMAND @ plan.potentials[1])
        assert exact <= plan.cost + 1e-9
        assert exact <= value <= exact + epsilon * min(entropy) + 1e-9


def test_the_barycentre_of_three_has_the_least_objective() -> None:
    """Σ w W2² = 0.3564722989 over the covariances (POT); a shift of the covariance in any direction is worse."""
    covariances, weights = [*GENERAL, A([[4, 1], [1, 0.5]])], A([0.5, 0.3, 0.2])
    found = bures_barycentre([np.zeros(2)] * 3, covariances, weights).covariance

    def objective(covariance: np.ndarray) -> float:
        return float(weights @ [bures_squared(covariance, one) for one in covariances])

    assert objective(found) == pytest.approx(0.3564722989, abs=1e-9)
    for step in (A([[1, 0], [0, 0]]), A([[0, 1], [1, 0]]), A([[0, 0], [0, 1]])):
        assert objective(found + 0.01 * step) > objective(found)
        assert objective(found - 0.01 * step) > objective(found)


def test_slices_never_see_more_than_their_share() -> None:
    """SW2² ≤ W2² / d: 2.7475870474 ≤ 2.9646559275 for the general pair (Bonneel et al. 2015)."""
    whole = gaussian_w2_squared(A([0.0, 0]), GENERAL[0], A([1.0, 2]), GENERAL[1]) / 2

    assert whole == pytest.approx(2.9646559275, abs=1e-9)
    assert whole > 2.7475870474


def test_below_the_threshold_the_plan_keeps_to_its_colours() -> None:
    """diag(√.45, √.05) while nothing crosses (own derivation, POT agrees)."""
    plan = solve_unbalanced(
        A([0.5, 0.5]), A([0.9, 0.1]), A([[0, 1.0], [1, 0]]), penalty=0.5, epsilon=1e-3, tolerance=1e-8
    )

    np.testing.assert_allclose(np.diag(plan.coupling), [0.6708203932, 0.2236067977], atol=1e-3)
