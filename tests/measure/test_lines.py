"""Sliced distances against closed forms and POT."""

from __future__ import annotations

import numpy as np
import ot
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hueferry.measure.lines import SortedLines, sliced_distance, squared_on_lines
from hueferry.transport.sliced import spiral_directions
from measure.clouds import cloud, scattered, weights_of

FIRST, SECOND = cloud(scattered(1), weights_of(1)), cloud(scattered(2, 43), weights_of(2, 43))


def test_each_line_is_solved_exactly() -> None:
    """Oracle: POT's one-dimensional solver on every line."""
    lines = spiral_directions(40)

    squared = squared_on_lines(FIRST, SECOND, lines)

    oracle = [
        ot.wasserstein_1d(FIRST.colours @ v, SECOND.colours @ v, FIRST.weights, SECOND.weights, p=2) for v in lines
    ]
    assert squared == pytest.approx(oracle, abs=1e-9)


def test_directions_are_unit_vectors_spread_evenly() -> None:
    """Of evenly spread unit vectors the second moment is I / 3."""
    lines = spiral_directions(64)

    assert np.linalg.norm(lines, axis=1) == pytest.approx(np.ones(64), abs=1e-12)
    assert lines.T @ lines / 64 == pytest.approx(np.eye(3) / 3, abs=0.01)


def test_a_shift_is_its_length_over_root_three() -> None:
    """SW2² = |Δm|² / d for a cloud and its copy shifted by Δm (Bonneel et al. 2015); (1, 2, 2) has length 3."""
    shifted = cloud(FIRST.colours + np.array([1, 2, 2]), FIRST.weights)

    assert sliced_distance(FIRST, shifted, directions=512) == pytest.approx(np.sqrt(3), rel=2e-3)


def test_isotropic_normals_have_their_closed_form() -> None:
    """SW2² = (s₁ − s₂)² + |Δm|² / d: deviations 1 and 2, Δm = (1, 2, 2): 4.0; 20,000 samples, 3 %."""
    rng = np.random.default_rng(0)
    first, second = cloud(rng.normal(size=(20000, 3))), cloud(2 * rng.normal(size=(20000, 3)) + [1, 2, 2])

    assert sliced_distance(first, second, directions=32) ** 2 == pytest.approx(4.0, rel=0.03)


def test_it_is_never_more_than_the_full_distance_over_root_three() -> None:
    """SW2² ≤ W2² / d, full distance by POT."""
    full = ot.emd2(FIRST.weights, SECOND.weights, ot.dist(FIRST.colours, SECOND.colours))

    assert sliced_distance(FIRST, SECOND, directions=256) ** 2 <= full / 3 * 1.005


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 10_000))
def test_quantile_vectors_give_the_distance_from_below(seed: int) -> None:
    first, second = cloud(scattered(seed), weights_of(seed)), cloud(scattered(seed + 1), weights_of(seed + 1))
    lines = spiral_directions(16)

    exact = float(np.sqrt(squared_on_lines(first, second, lines).mean()))
    vectors = [SortedLines.of(c.colours, lines).quantiles(c.weights, 256) for c in (first, second)]

    assert 0.9 * exact <= np.linalg.norm(vectors[0] - vectors[1]) <= exact + 1e-9


def test_splitting_a_colour_in_two_changes_nothing() -> None:
    split = cloud(np.concatenate([FIRST.colours] * 2), np.concatenate([0.3 * FIRST.weights, 0.7 * FIRST.weights]))

    assert sliced_distance(split, SECOND) == pytest.approx(sliced_distance(FIRST, SECOND), abs=1e-9)
    assert sliced_distance(split, FIRST) == pytest.approx(0, abs=1e-6)
