"""Large clouds: the same plan as with a matrix of costs, in memory that grows with the points."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest

from hueferry.errors import InputError, NotConverged
from hueferry.transport.costs import squared_distances
from hueferry.transport.entropic import entropic_potentials, warm_potentials
from hueferry.transport.points import potentials_between


def clouds(n: int, m: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(1)
    return rng.random((n, 3)), rng.dirichlet(np.full(n, 5.0)), rng.random((m, 3)) ** 1.2, rng.dirichlet(np.full(m, 5.0))


def test_the_potentials_are_those_of_the_full_problem() -> None:
    x, a, y, b = clouds(80, 60)

    ours = potentials_between(x, a, y, b, epsilon=0.02, tolerance=1e-4)
    full = entropic_potentials(a, b, squared_distances(x, y), epsilon=0.02, tolerance=1e-6, dtype=np.float64)

    np.testing.assert_allclose(ours.f - ours.f[0], full.f - full.f[0], atol=1e-4)
    assert a @ ours.f + b @ ours.g == pytest.approx(a @ full.f + b @ full.g, abs=1e-6)


def test_memory_grows_with_the_points_and_not_with_their_pairs() -> None:
    x, a, y, b = clouds(6000, 6000)
    tracemalloc.start()

    potentials_between(x, a, y, b, epsilon=0.1, tolerance=1e-2)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()

    assert peak < 40e6  # a float32 matrix of costs alone would be 144 MB


def test_a_warm_start_saves_iterations() -> None:
    x, a, y, b = clouds(80, 60)
    cost = squared_distances(x, y)
    cold = entropic_potentials(a, b, cost, epsilon=0.01, tolerance=1e-4)

    warm = warm_potentials(a, b, cost * 1.001, cold.g, epsilon=0.01, tolerance=1e-4)

    assert warm.iterations < 0.3 * cold.iterations


def test_wrong_clouds_are_refused_and_giving_up_is_said() -> None:
    x, a, y, b = clouds(30, 30)

    with pytest.raises(InputError, match="must be positive"):
        potentials_between(x, a * 0, y, b, epsilon=0.1)
    with pytest.raises(NotConverged):
        potentials_between(x, a, y, b, epsilon=1e-4, tolerance=1e-9, iterations=12)
