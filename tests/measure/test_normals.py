"""Normals: published closed forms, invariance, and bounds by other routes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.linalg import eigh
from scipy.stats import norm

from hueferry.errors import InputError
from hueferry.measure import normals as n
from hueferry.measure.normals import Normal


def line(mean: float, deviation: float) -> Normal:
    return Normal([mean], [[deviation**2]])


FIRST = Normal([0, 0], [[2, 0.5], [0.5, 1]])
SECOND = Normal([1, 2], [[1, -0.3], [-0.3, 3]])


def moved(normal: Normal, matrix: np.ndarray, offset: np.ndarray) -> Normal:
    return Normal(matrix @ normal.mean + offset, matrix @ normal.covariance @ matrix.T)


@st.composite
def any_normal(draw, size: int = 3) -> Normal:
    numbers = st.floats(-2, 2)
    root = np.array(draw(st.lists(numbers, min_size=size * size, max_size=size * size))).reshape(size, size)
    mean = np.array(draw(st.lists(numbers, min_size=size, max_size=size)))
    return Normal(mean, root @ root.T + 0.05 * np.eye(size))


@pytest.mark.parametrize(
    ("p", "q", "value"),
    [
        (line(0, 1), line(0, 2), np.log(2) - 3 / 8),
        (line(0, 2), line(0, 1), 1.5 - np.log(2)),
        (line(0, 1), line(1, 1), 0.5),
        (line(0, 1), line(1, 2), 0.4431471806),
        (line(1, 2), line(0, 1), 1.3068528194),
        (FIRST, SECOND, 1.9174988872),
        (SECOND, FIRST, 2.8314456391),
    ],
)
def test_kl_of_normals(p, q, value) -> None:
    """Formula: Kullback 1959, chapter 9; values: closed form, checked by quadrature."""
    assert n.kullback_leibler(p, q) == pytest.approx(value, abs=1e-9)


def test_kl_of_normals_is_that_of_their_densities() -> None:
    """Oracle: SciPy's quadrature of p ln(p / q)."""
    integral, _ = quad(lambda x: norm.pdf(x) * (norm.logpdf(x) - norm.logpdf(x, 1, 2)), -20, 20)

    assert n.kullback_leibler(line(0, 1), line(1, 2)) == pytest.approx(integral, abs=1e-9)


def test_jeffreys_of_normals_adds_both_ways() -> None:
    assert n.jeffreys(line(0, 1), line(1, 2)) == pytest.approx(1.75, abs=1e-10)


@pytest.mark.parametrize(
    ("p", "q", "distance", "hellinger"),
    [(line(0, 1), line(1, 2), 0.1615717757, 0.3862570878), (FIRST, SECOND, 0.4584202289, 0.6063977925)],
)
def test_bhattacharyya_and_hellinger_of_normals(p, q, distance, hellinger) -> None:
    """Bhattacharyya 1943: BC = √(2 s₁ s₂ / (s₁² + s₂²)) exp(−Δm² / (4 (s₁² + s₂²))) = .8508054622 on the line."""
    assert n.bhattacharyya(p, q) == pytest.approx(distance, abs=1e-9)
    assert n.hellinger(p, q) == pytest.approx(hellinger, abs=1e-9)


@pytest.mark.parametrize(
    ("p", "q", "distance"),
    [
        (line(0, 1), line(0, np.e), np.sqrt(2)),
        (line(0, 1), line(0, 2), 0.9802581435),
        (line(0, 1), line(1, 1), 0.9802581435),  # √2 ln 2; without the ½ on the mean it would be 1.3611
        (line(0, 1), line(1, 2), 1.1893809314),
        (line(0, 1), line(4, 1), 3.2419879579),
        (line(1.5, 0.75), line(3.5, 0.75), 2.3768684124),
        (line(0.5, 1.5), line(1.5, 1.5), 0.6606432303),
        (line(100, 15), line(110, 12), 0.7989948618),
    ],
)
def test_fisher_rao_on_the_line(p, q, distance) -> None:
    """Rao 1945; Atkinson & Mitchell 1981; Costa, Santos & Strapasson 2015: √2 arccosh(1 + (Δm²/2 + Δs²)/(2 s₁ s₂))."""
    assert n.fisher_rao_1d(p, q) == pytest.approx(distance, abs=1e-10)
    assert n.fisher_rao_1d(q, p) == pytest.approx(distance, abs=1e-10)


def test_the_geodesic_takes_a_detour_through_larger_spread() -> None:
    """The straight way from (0, 1) to (4, 1) at constant deviation has length 4."""
    assert n.fisher_rao_1d(line(0, 1), line(4, 1)) < 4


def test_fisher_rao_is_the_length_of_a_numerical_geodesic() -> None:
    """Oracle: ds² = (dm² + 2 ds²)/s² summed over 4,000 chords of the half-plane's circle through both points."""
    p, q = np.array([0.0, 1.0]), np.array([1.0, 2.0])
    x = np.array([p[0], q[0]]) / np.sqrt(2)
    centre = (x[1] ** 2 + q[1] ** 2 - x[0] ** 2 - p[1] ** 2) / (2 * (x[1] - x[0]))
    angles = np.linspace(np.arctan2(p[1], x[0] - centre), np.arctan2(q[1], x[1] - centre), 4001)
    radius = np.hypot(x[0] - centre, p[1])
    mean, deviation = np.sqrt(2) * (centre + radius * np.cos(angles)), radius * np.sin(angles)
    middle = (deviation[1:] + deviation[:-1]) / 2
    length = np.sqrt((np.diff(mean) ** 2 + 2 * np.diff(deviation) ** 2) / middle**2).sum()

    assert n.fisher_rao_1d(line(0, 1), line(1, 2)) == pytest.approx(length, abs=1e-6)


@pytest.mark.parametrize(("p", "q"), [(line(0, 1), line(1, 2)), (line(100, 15), line(110, 12))])
def test_units_change_nothing_on_the_line(p, q) -> None:
    turned = [moved(normal, np.array([[10.0]]), np.array([3.0])) for normal in (p, q)]

    for figure in (n.fisher_rao_1d, n.kullback_leibler, n.bhattacharyya, n.hellinger):
        assert figure(*turned) == pytest.approx(figure(p, q), abs=1e-10)


def test_equal_spreads_cost_the_same_transport_but_grow_more_distinct_as_they_shrink() -> None:
    """W2 between N(0, s) and N(1, s) is 1 for every s (Givens & Shortt 1984); Fisher–Rao falls as s grows."""
    from hueferry.transport.gaussian import gaussian_w2_squared

    spreads = (0.1, 1.0, 7.0)
    pairs = [(line(0, s), line(1, s)) for s in spreads]

    costs = [gaussian_w2_squared(p.mean, p.covariance, q.mean, q.covariance) for p, q in pairs]
    distances = [n.fisher_rao_1d(p, q) for p, q in pairs]

    assert costs == pytest.approx([1, 1, 1], abs=1e-9)
    assert distances[0] > 4 * distances[1] > 20 * distances[2]


def test_near_neighbours_kl_is_half_the_squared_distance() -> None:
    """KL 1.47370e-4 against d²/2 1.48513e-4 from (0, 1) to (.01, 1.01)."""
    p, q = line(0, 1), line(0.01, 1.01)

    assert n.kullback_leibler(p, q) == pytest.approx(1.47370e-4, abs=5e-10)
    assert n.fisher_rao_1d(p, q) ** 2 / 2 == pytest.approx(1.48513e-4, abs=5e-10)


def test_bounds_meet_in_the_closed_form_for_equal_means() -> None:
    """√(½ Σ ln² λ), λ = .4464013385, 3.7250272329: 1.0908532841 (Atkinson & Mitchell 1981)."""
    lower, upper = n.fisher_rao_bounds(Normal([0, 0], FIRST.covariance), Normal([0, 0], SECOND.covariance))

    ratios = eigh(SECOND.covariance, FIRST.covariance, eigvals_only=True)
    assert lower == pytest.approx(np.sqrt((np.log(ratios) ** 2).sum() / 2), abs=1e-9)
    assert lower == pytest.approx(1.0908532841, abs=1e-9)
    assert upper == pytest.approx(lower, abs=1e-4)


@settings(max_examples=60, deadline=None)
@given(first=st.tuples(st.floats(-3, 3), st.floats(0.2, 4)), second=st.tuples(st.floats(-3, 3), st.floats(0.2, 4)))
def test_bounds_hold_where_the_distance_is_known(first, second) -> None:
    """On the line the distance has a closed form: what is given for any dimension must bracket it."""
    p, q = line(*first), line(*second)

    lower, upper = n.fisher_rao_bounds(p, q)

    assert lower - 1e-9 <= n.fisher_rao_1d(p, q) <= upper + 1e-9


@settings(max_examples=40, deadline=None)
@given(
    mean=st.lists(st.floats(-2, 2), min_size=3, max_size=3), scale=st.lists(st.floats(0.3, 3), min_size=3, max_size=3)
)
def test_bounds_hold_for_independent_channels(mean, scale) -> None:
    """Independent coordinates: the distance is the root of the sum of squares of each (a product of half-planes)."""
    p, q = Normal(np.zeros(3), np.eye(3)), Normal(mean, np.diag(np.square(scale)))

    lower, upper = n.fisher_rao_bounds(p, q)

    exact = np.sqrt(sum(n.fisher_rao_1d(p.along(i), q.along(i)) ** 2 for i in range(3)))
    assert lower - 1e-9 <= exact
    assert lower <= upper + 1e-12
    assert upper <= 1.6 * exact + 1e-9


@settings(max_examples=40, deadline=None)
@given(p=any_normal(), q=any_normal(), seed=st.integers(0, 999))
def test_affine_changes_of_units_change_nothing(p, q, seed) -> None:
    rng = np.random.default_rng(seed)
    matrix = rng.normal(size=(3, 3)) + 3 * np.eye(3)
    offset = rng.normal(size=3)
    turned = [moved(normal, matrix, offset) for normal in (p, q)]

    for figure in (n.kullback_leibler, n.bhattacharyya):
        assert figure(*turned) == pytest.approx(figure(p, q), rel=1e-6, abs=1e-8)
    assert n.fisher_rao_bounds(*turned) == pytest.approx(n.fisher_rao_bounds(p, q), rel=1e-5, abs=1e-6)


def test_the_published_pair_is_unchanged_by_the_published_change() -> None:
    """x → [[2, 1], [0, 3]] x + (5, −1)."""
    matrix, offset = np.array([[2.0, 1], [0, 3]]), np.array([5.0, -1])

    value = n.kullback_leibler(moved(FIRST, matrix, offset), moved(SECOND, matrix, offset))

    assert value == pytest.approx(1.9174988872, abs=1e-9)


def test_flat_directions_are_infinitely_distinct_unless_both_are_flat_there() -> None:
    flat, full = Normal([0, 0], [[1, 0], [0, 0]]), Normal([0, 0], [[1, 0], [0, 1]])
    other = Normal([0, 0], [[4, 0], [0, 0]])

    assert n.kullback_leibler(flat, full) == n.kullback_leibler(full, flat) == np.inf
    assert n.hellinger(flat, full) == 1.0
    assert n.fisher_rao_bounds(flat, full) == (np.inf, np.inf)
    assert n.kullback_leibler(flat, other) == pytest.approx(0.3181471806, abs=1e-9)  # N(0,1) | N(0,2)
    assert n.kullback_leibler(flat, Normal([0, 1], flat.covariance)) == np.inf
    assert n.fisher_rao_1d(line(0, 0), line(0, 1)) == np.inf


def test_points_are_equal_or_infinitely_distinct() -> None:
    here, there = Normal([1, 2], np.zeros((2, 2))), Normal([1, 3], np.zeros((2, 2)))

    assert n.kullback_leibler(here, here) == n.fisher_rao_bounds(here, here)[1] == 0
    assert n.kullback_leibler(here, there) == np.inf


def test_what_is_no_normal_is_refused() -> None:
    with pytest.raises(InputError, match="square covariance"):
        Normal([0, 0], [[1]])
    with pytest.raises(InputError, match="finite"):
        Normal([np.nan], [[1]])
    with pytest.raises(InputError, match="one coordinate"):
        n.fisher_rao_1d(FIRST, SECOND)
    with pytest.raises(InputError, match="cannot be compared"):
        n.kullback_leibler(FIRST, line(0, 1))
