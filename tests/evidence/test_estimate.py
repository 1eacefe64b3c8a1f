"""The fit to pairs: planted changes come back, in spite of gross errors and clipping."""

import numpy as np
import pytest

from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.evidence.camera import NAMES, CameraMap
from hueferry.evidence.estimate import expected_error, fit_camera, lacking
from hueferry.evidence.prior import no_change

_CHANGES = {"gain_red": 0.3, "gain_green": 0.15, "chroma": -0.2, "turn": 0.1, "power": 0.1}
PLANTED = CameraMap(np.array([_CHANGES.get(name, 0.0) for name in NAMES]))


def colours(count: int, seed: int) -> np.ndarray:
    return linear_srgb_to_oklab(np.random.default_rng(seed).random((count, 3)) ** 2)


def test_a_planted_change_comes_back() -> None:
    source = colours(800, 0)

    estimate = fit_camera(source, PLANTED(source), weights=np.ones(800), prior=no_change(), effective=800.0)

    fresh = colours(200, 1)
    assert np.linalg.norm(estimate.map(fresh) - PLANTED(fresh), axis=1).max() < 0.004


def test_a_third_of_gross_errors_changes_little() -> None:
    source = colours(900, 2)
    reference = PLANTED(source) + np.random.default_rng(3).normal(0, 0.002, (900, 3))
    reference[:300] = colours(300, 4)

    estimate = fit_camera(source, reference, weights=np.ones(900), prior=no_change(), effective=900.0)

    fresh = colours(200, 5)
    assert np.linalg.norm(estimate.map(fresh) - PLANTED(fresh), axis=1).mean() < 0.004


def test_clipped_channels_pull_nothing_down() -> None:
    source = colours(900, 6)
    light = oklab_to_linear_srgb(PLANTED(source))
    high = light > 0.35
    clipped = linear_srgb_to_oklab(np.minimum(light, 0.35))

    bounded = fit_camera(
        source, clipped, weights=np.ones(900), prior=no_change(), effective=900.0, ends=(np.zeros_like(high), high)
    )
    believed = fit_camera(source, clipped, weights=np.ones(900), prior=no_change(), effective=900.0)

    fresh = colours(200, 7)
    bounded_error = np.linalg.norm(bounded.map(fresh) - PLANTED(fresh), axis=1).mean()
    assert bounded_error < 0.015
    assert bounded_error < np.linalg.norm(believed.map(fresh) - PLANTED(fresh), axis=1).mean() / 2


def test_a_bound_that_is_met_lacks_nothing() -> None:
    reference, brighter = linear_srgb_to_oklab(np.full((1, 3), 1.0)), linear_srgb_to_oklab(np.full((1, 3), 1.4))
    everywhere, nowhere = np.ones((1, 3), dtype=bool), np.zeros((1, 3), dtype=bool)

    assert lacking(brighter, reference, low=nowhere, high=everywhere) == pytest.approx(np.zeros((1, 3)), abs=1e-9)
    assert lacking(brighter, reference, low=nowhere, high=nowhere)[0, 0] < -0.1


def test_without_pairs_worth_the_name_the_prior_stands() -> None:
    source = colours(50, 8)

    estimate = fit_camera(source, PLANTED(source), weights=np.ones(50), prior=no_change(), effective=1e-9)

    assert estimate.map.parameters == pytest.approx(np.zeros(len(NAMES)), abs=1e-5)


def test_expected_error_grows_with_the_doubt() -> None:
    source = colours(100, 9)
    covariance = np.linalg.inv(no_change().precision)

    small, large = (expected_error(PLANTED, PLANTED.parameters, covariance * scale, source) for scale in (0.01, 0.04))

    assert 0 < small < large
    assert large / small == pytest.approx(2.0, rel=0.1)
