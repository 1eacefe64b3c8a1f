"""The table of costs: complete, finite as JSON, and with units."""

from __future__ import annotations

import json
import math

import attrs
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import cKDTree
from skimage import data

from hueferry.colour.spaces import oklab_to_lab, xyz_to_oklab
from hueferry.measure.bins import shared_histograms
from hueferry.measure.cloud import LabCloud
from hueferry.measure.cost import UNITS, Cost, measure, quick_cost, sliced_w2
from hueferry.palettes.build import palette_of
from hueferry.picture import Picture
from measure.clouds import palette, scattered, weights_of
from palettes.coded import Coded

FIRST, SECOND = palette(scattered(1), weights_of(1)), palette(scattered(2, 43), weights_of(2, 43))


def test_every_figure_has_a_unit_and_every_unit_a_figure() -> None:
    assert set(UNITS) == {field.name for field in attrs.fields(Cost)}


def test_the_full_measure_leaves_nothing_out() -> None:
    assert all(value is not None for value in attrs.astuple(measure(FIRST, SECOND)))


def test_the_promised_keys_are_there_for_quick_and_full_measures() -> None:
    promised = {"w2", "sliced_w2", "gaussian_w2"}

    assert promised | {"w1", "sinkhorn_divergence"} <= set(measure(FIRST, SECOND).as_dict())
    assert promised <= set(quick_cost(FIRST, SECOND).as_dict())


def test_infinite_figures_are_named_and_null_in_json() -> None:
    """The two palettes share few bins, so that each has colours that the other lacks: KL is infinite both ways."""
    cost = measure(FIRST, SECOND)

    told = json.loads(json.dumps(cost.as_dict(), allow_nan=False))

    assert cost.kl == np.inf
    assert told["kl"] is None
    assert {"kl", "kl_reverse", "jeffreys"} <= set(told["infinite"])


def test_a_palette_is_at_no_distance_from_itself() -> None:
    for cost in (measure(FIRST, FIRST), quick_cost(FIRST, FIRST)):
        told = {k: v for k, v in cost.as_dict().items() if k not in ("infinite", "reduction_bound", "w2_gap")}
        assert told == pytest.approx(dict.fromkeys(told, 0.0), abs=1e-6)


def test_signed_shifts_turn_with_the_direction_and_distances_do_not() -> None:
    there, back = measure(FIRST, SECOND), measure(SECOND, FIRST)

    assert [back.mean_shift_l, back.mean_shift_a, back.mean_shift_b] == pytest.approx(
        [-there.mean_shift_l, -there.mean_shift_a, -there.mean_shift_b], abs=1e-12
    )
    for name in ("w1", "w2", "gaussian_w2", "hellinger", "fisher_rao", "normal_jeffreys", "normal_fisher_rao_upper"):
        assert getattr(there, name) == pytest.approx(getattr(back, name), rel=1e-6)
    assert there.normal_kl != pytest.approx(back.normal_kl, rel=0.01)


def test_a_lighter_copy_is_lighter_by_that_much() -> None:
    copy = palette(scattered(1) + np.array([4, 0, 0]), weights_of(1))

    cost = measure(FIRST, copy)

    assert (cost.w1, cost.w2, cost.gaussian_w2, cost.mean_shift, cost.mean_shift_l) == pytest.approx([4] * 5, abs=1e-5)
    assert cost.sliced_w2 == pytest.approx(4 / np.sqrt(3), rel=0.01)


def test_flat_pictures_are_measured_without_warning() -> None:
    """Two flat colours 5 apart: every transport cost is 5, and as histograms and normals they share nothing."""
    cost = measure(palette([[50, 0, 0]]), palette([[50, 3, 4]]))

    assert (cost.w1, cost.w2, cost.gaussian_w2, cost.sinkhorn_divergence) == pytest.approx([5] * 4, abs=1e-6)
    assert (cost.normal_kl, cost.normal_hellinger) == (np.inf, 1.0)


@settings(max_examples=120, deadline=None)
@given(seed=st.integers(0, 10_000), sizes=st.tuples(st.integers(1, 6), st.integers(1, 6)), kind=st.integers(0, 4))
def test_odd_palettes_are_measured_without_nan_or_warning(seed: int, sizes: tuple[int, int], kind: int) -> None:
    """Points, lines, grays, duplicates, zero weights: every figure is a number or named as infinite."""
    rng = np.random.default_rng(seed)
    odd = []
    for size in sizes:
        lab = rng.integers(0, 4, (size, 3)) * np.array([30.0, 10, 10]) * (rng.random(3) > 0.15 * kind)
        weights = rng.random(size) * (rng.random(size) > 0.1 * kind) + np.eye(size)[0] * 1e-6
        odd.append(palette(lab, weights / weights.sum()))

    for cost in (measure(*odd), quick_cost(*odd)):
        told = cost.as_dict()
        infinite = told.pop("infinite")
        assert all((value is None) == (name in infinite) for name, value in told.items())
        assert not any(math.isnan(value) for value in told.values() if value is not None)
        assert json.loads(json.dumps(told, allow_nan=False))


def test_quick_figures_are_near_the_full_ones_on_photographs() -> None:
    first, second = (palette_of(Picture(pixels, Coded())) for pixels in (data.chelsea(), data.coffee()))

    quick, full = quick_cost(first, second), measure(first, second)

    assert quick.w2 == pytest.approx(full.w2, rel=0.02)
    assert quick.sliced_w2 == pytest.approx(full.sliced_w2, rel=0.02)
    assert sliced_w2(first, second) == pytest.approx(full.sliced_w2, rel=0.02)


def test_reduction_moves_the_cost_by_no_more_than_its_bound() -> None:
    """Truth: POT on 3,000 pixels of each picture, drawn at random; the bound is for the palettes of all pixels."""
    import ot

    pictures = [data.chelsea(), data.coffee()]
    cost = measure(*(palette_of(Picture(pixels, Coded())) for pixels in pictures))
    rng = np.random.default_rng(0)
    samples = [
        oklab_to_lab(xyz_to_oklab(Coded().to_xyz(rng.permutation(pixels.reshape(-1, 3))[:3000] / 255)))
        for pixels in pictures
    ]

    truth = np.sqrt(ot.emd2([], [], ot.dist(*samples), numItermax=1_000_000))
    assert abs(cost.w2 - truth) < cost.reduction_bound
    assert abs(cost.w2 - truth) < 0.03 * truth


def test_the_spread_in_lab_is_no_less_than_that_of_the_pixels() -> None:
    pixels = data.coffee()
    palette_ = palette_of(Picture(pixels, Coded()))
    cloud = LabCloud.of(palette_)
    every = oklab_to_lab(xyz_to_oklab(Coded().to_xyz(pixels.reshape(-1, 3)[::7] / 255)))

    distance, _ = cKDTree(cloud.colours).query(every)

    assert np.sqrt((distance**2).mean()) <= cloud.spread <= 3 * np.sqrt((distance**2).mean())


def test_histograms_share_their_bins() -> None:
    first = LabCloud(np.array([[50.0, 0, 0], [50, 30, 0]]), np.array([0.25, 0.75]), 0.0)
    second = LabCloud(np.array([[52.0, 1, -2], [10, 0, 0]]), np.array([0.6, 0.4]), 0.0)

    p, q = shared_histograms(first, second)

    assert sorted(zip(p.tolist(), q.tolist(), strict=True)) == [(0.0, 0.4), (0.25, 0.6), (0.75, 0.0)]
