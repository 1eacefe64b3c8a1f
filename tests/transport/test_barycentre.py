"""What palettes have in common: laws and closed forms."""

from __future__ import annotations

import attrs
import numpy as np
import pytest

from hueferry.errors import InputError
from hueferry.palettes.palette import Palette
from hueferry.transport.barycentre import (
    bures_barycentre,
    common_palette,
    free_support_barycentre,
    robust_shares,
    sliced_barycentre,
)


def cloud(seed: int, *, count: int = 120) -> Palette:
    rng = np.random.default_rng(seed)
    return Palette(rng.normal([0.5, 0, 0], [0.15, 0.05, 0.05], (count, 3)), rng.dirichlet(np.full(count, 3.0)))


def shifted(palette: Palette, *step: float) -> Palette:
    return attrs.evolve(palette, colours=palette.colours + np.array(step))


HALVES = np.array([0.5, 0.5])


def test_the_common_palette_of_one_is_itself() -> None:
    one = cloud(1)

    common = common_palette([one])

    np.testing.assert_allclose(common.mean, one.mean, atol=1e-9)
    np.testing.assert_allclose(common.covariance, one.covariance, atol=1e-9)


def test_two_shifts_of_one_palette_meet_half_way() -> None:
    """The barycentre of translates is the translate by the mean shift (Agueh & Carlier 2011)."""
    one = cloud(2)

    common = common_palette([shifted(one, 0.1, 0.02, 0), shifted(one, -0.1, -0.02, 0)])

    np.testing.assert_allclose(common.mean, one.mean, atol=1e-9)
    np.testing.assert_allclose(common.covariance, one.covariance, atol=1e-9)


def test_the_order_of_palettes_does_not_matter() -> None:
    palettes = [cloud(seed) for seed in (3, 4, 5)]

    first, second = common_palette(palettes), common_palette(palettes[::-1])

    np.testing.assert_allclose(first.mean, second.mean, atol=1e-12)
    np.testing.assert_allclose(first.covariance, second.covariance, atol=1e-9)


def test_one_orange_outlier_hardly_moves_the_common_palette() -> None:
    palettes = [shifted(cloud(6), *np.random.default_rng(s).normal(0, 0.01, 3)) for s in range(7)]
    orange = shifted(cloud(6), 0.1, 0.25, 0.25)

    without, with_it = common_palette(palettes), common_palette([*palettes, orange])
    plain = bures_barycentre(
        [p.mean for p in [*palettes, orange]], [p.covariance for p in [*palettes, orange]], np.full(8, 1 / 8)
    )

    pulled = np.linalg.norm(with_it.mean - without.mean)
    assert pulled < 0.25 * np.linalg.norm(plain.mean - without.mean)
    assert robust_shares([*palettes, orange], np.full(8, 1 / 8))[-1] < 0.04


@pytest.mark.parametrize("method", [free_support_barycentre, sliced_barycentre])
def test_clouds_of_translates_meet_half_way(method: object) -> None:
    one = cloud(7, count=60)
    even = np.full(60, 1 / 60)
    step = np.array([0.1, 0, 0.05])
    supports = [one.colours + step, one.colours - step]
    start = np.random.default_rng(8).normal(0.5, 0.1, (60, 3))

    found = method(supports, [even, even], HALVES, start)

    np.testing.assert_allclose(found.mean(axis=0), one.colours.mean(axis=0), atol=2e-3)
    np.testing.assert_allclose(np.cov(found.T), np.cov(one.colours.T), atol=1.5e-3)


@pytest.mark.parametrize("weights", [[0.5, 0.6], [1.5, -0.5], [1.0], [np.nan, 0.5]])
def test_weights_must_be_shares(weights: list[float]) -> None:
    with pytest.raises(InputError, match="weights"):
        bures_barycentre([np.zeros(2)] * 2, [np.eye(2)] * 2, np.array(weights))


def test_there_must_be_a_palette() -> None:
    with pytest.raises(InputError, match="no palette"):
        common_palette([])
