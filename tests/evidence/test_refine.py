"""Corrections: they follow what pairs say, end where pairs end, and never fold."""

import numpy as np
import pytest

from hueferry.colour.spaces import linear_srgb_to_oklab
from hueferry.evidence.camera import SIZE, CameraMap
from hueferry.evidence.refine import fit_correction, refine

IDENTITY = CameraMap(np.zeros(SIZE))
COLOURS = linear_srgb_to_oklab(np.random.default_rng(0).random((1500, 3)))


def test_a_smooth_residual_is_followed() -> None:
    residual = np.stack([0.02 * np.sin(4 * COLOURS[:, 0]), 0.1 * COLOURS[:, 2] ** 2, 0 * COLOURS[:, 0]], axis=1)

    correction = fit_correction(COLOURS, residual, weights=np.ones(1500), width=0.12)

    assert np.abs(correction(COLOURS) - residual).mean() < 0.002


def test_away_from_pairs_nothing_is_added() -> None:
    near = COLOURS[COLOURS[:, 0] < 0.5]
    correction = fit_correction(near, np.full_like(near, 0.02), weights=np.ones(len(near)), width=0.12)

    assert correction(np.array([[1.6, 0.0, 0.0], [0.4, 1.0, 1.0]])) == pytest.approx(np.zeros((2, 3)), abs=1e-6)


def test_gross_errors_are_not_followed() -> None:
    residual = np.zeros_like(COLOURS)
    residual[::5] = np.random.default_rng(1).normal(0, 0.2, (300, 3))

    correction = fit_correction(COLOURS, residual, weights=np.ones(1500), width=0.12)

    assert np.abs(correction(COLOURS)).mean() < 0.004


def test_a_folding_correction_is_weakened_until_it_does_not_fold() -> None:
    folding = np.stack([-1.5 * (COLOURS[:, 0] - 0.5), 0 * COLOURS[:, 0], 0 * COLOURS[:, 0]], axis=1)
    correction = fit_correction(COLOURS, folding, weights=np.full(1500, 1.0), width=0.24)

    map_ = refine(IDENTITY, [correction], [1.0], COLOURS)

    ramp = np.stack([np.linspace(0.2, 0.9, 500), np.zeros(500), np.zeros(500)], axis=1)
    assert (np.diff(map_(ramp)[:, 0]) > 0).all()
