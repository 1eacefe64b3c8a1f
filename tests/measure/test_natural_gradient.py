"""The divergence of normals generates the Fisher metric, and steps measured by that metric have known landing points.

For normals the log-likelihood of data is −n KL(normal of the data | model) up to a constant: gradient and information
both come from `kullback_leibler` alone, by differences.
"""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.measure.normals import Normal, kullback_leibler

DATA = np.array([2.0, 3, 5, 7, 11, 13])
FITTED = Normal([DATA.mean()], [[DATA.var()]])
"""Mean 6.8333333333, variance 16.1388888889."""


def of_moments(parameters: np.ndarray) -> Normal:
    return Normal(parameters[:1], [[parameters[1]]])


def of_expectations(parameters: np.ndarray) -> Normal:
    return Normal(parameters[:1], [[parameters[1] - parameters[0] ** 2]])


def natural_step(model, parameters: np.ndarray, *, plain: bool = False) -> np.ndarray:
    """One step of length 1 down KL(data | model), measured by the information (or not at all)."""
    steps = np.diag(1e-4 * np.maximum(np.abs(parameters), 0.5))
    here = model(parameters)

    def slope(step):
        ends = [kullback_leibler(FITTED, model(parameters + sign * step)) for sign in (1, -1)]
        return (ends[0] - ends[1]) / (2 * step.sum())

    def curvature(first, second):
        def at(i, j):
            return kullback_leibler(here, model(parameters + i * first + j * second))

        return (at(1, 1) - at(1, -1) - at(-1, 1) + at(-1, -1)) / (4 * first.sum() * second.sum())

    gradient = np.array([slope(step) for step in steps])
    information = np.eye(2) if plain else np.array([[curvature(a, b) for b in steps] for a in steps])
    return parameters - np.linalg.solve(information, gradient)


def test_the_divergences_curvature_is_the_fisher_information() -> None:
    """diag(1 / v, 1 / (2 v²)) in mean and variance (Rao 1945): at v = 4, diag(.25, .03125)."""
    parameters = np.array([1.0, 4.0])
    step = 1e-3
    curvature = [
        2 * kullback_leibler(of_moments(parameters), of_moments(parameters + step * axis)) / step**2
        for axis in np.eye(2)
    ]

    assert curvature == pytest.approx([0.25, 0.03125], rel=1e-3)


def test_one_step_from_zero_and_one() -> None:
    """Amari 1998; Osborne 1992: from (0, 1) to the mean and the mean of x², (6.8333333333, 62.8333333333)."""
    assert natural_step(of_moments, np.array([0.0, 1.0])) == pytest.approx([6.8333333333, 62.8333333333], rel=1e-5)


def test_two_steps_are_exact() -> None:
    once = natural_step(of_moments, np.array([0.0, 1.0]))

    assert natural_step(of_moments, once) == pytest.approx([6.8333333333, 16.1388888889], rel=1e-4)


@pytest.mark.parametrize("variance", [0.1, 1.0, 100.0])
def test_from_the_mean_any_variance_is_right_after_one_step(variance: float) -> None:
    step = natural_step(of_moments, np.array([DATA.mean(), variance]))

    assert step == pytest.approx([6.8333333333, 16.1388888889], rel=1e-4)


@pytest.mark.parametrize("start", [(0.0, 1.0), (5.0, 40.0), (-3.0, 30.0)])
def test_in_expectation_coordinates_one_step_from_anywhere_is_exact(start: tuple[float, float]) -> None:
    """(E x, E x²) = (6.8333333333, 62.8333333333), whose variance is 16.1388888889."""
    step = natural_step(of_expectations, np.array(start))

    assert step == pytest.approx([6.8333333333, 62.8333333333], rel=1e-3)


def test_a_plain_step_has_neither_property() -> None:
    plain = natural_step(of_moments, np.array([DATA.mean(), 1.0]), plain=True)

    assert plain[1] != pytest.approx(16.1388888889, rel=0.2)
    assert natural_step(of_expectations, np.array([5.0, 40.0]), plain=True) != pytest.approx([6.83, 62.83], rel=0.1)
