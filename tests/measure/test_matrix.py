"""Many palettes: order, outliers and map against cases whose answer is known."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.distance import pdist, squareform

from hueferry.errors import InputError
from hueferry.measure import matrix as m
from hueferry.measure.cost import sliced_w2
from measure.clouds import palette, scattered, weights_of


def shifted(step: float) -> np.ndarray:
    return scattered(1, 80) + np.array([step, step / 2, 0])


def test_the_matrix_holds_the_sliced_distances() -> None:
    palettes = [palette(scattered(seed, 400) + 3 * seed, weights_of(seed, 400)) for seed in range(5)]

    distances = m.distance_matrix(palettes)

    expected = [[sliced_w2(a, b) for b in palettes] for a in palettes]
    assert distances == pytest.approx(np.array(expected), rel=0.03, abs=0.02)
    assert (distances == distances.T).all()
    assert not np.diag(distances).any()


@settings(max_examples=30, deadline=None)
@given(order=st.permutations(range(9)))
def test_a_series_that_was_shuffled_is_put_in_order(order: list[int]) -> None:
    """A Robinson matrix has one perfect order and its reverse (Atkins, Boman & Hendrickson 1998)."""
    places = np.array([0, 1, 2.5, 3, 5, 6, 8, 8.5, 11])[order]

    found = places[list(m.seriate(squareform(pdist(places[:, None]))))]

    assert (np.diff(found) > 0).all() or (np.diff(found) < 0).all()


def test_the_order_begins_nearer_to_the_first() -> None:
    assert m.seriate(squareform(pdist(np.arange(6.0)[:, None])))[0] == 0


@pytest.mark.parametrize("odd", [0, 3, 7])
def test_one_that_stands_apart_is_found_and_no_other(odd: int) -> None:
    palettes = [palette(scattered(1, 80) + np.random.default_rng(seed).normal(size=3)) for seed in range(8)]
    palettes[odd] = palette(scattered(1, 80) + np.array([0, 40, 40]))

    found = m.compare(palettes, [str(i) for i in range(8)])

    assert found.outliers == (odd,)


def test_a_slow_drift_has_no_outliers() -> None:
    found = m.compare([palette(shifted(2.0 * i)) for i in range(12)], [str(i) for i in range(12)])

    assert found.outliers == ()
    assert found.order == tuple(range(12))


def test_equal_palettes_have_no_outliers_and_lie_on_one_spot() -> None:
    found = m.compare([palette(scattered(1))] * 4, list("abcd"))

    assert found.outliers == ()
    assert np.abs(found.positions).max() < 1e-5
    assert sorted(found.order) == [0, 1, 2, 3]


def test_points_of_a_plane_are_mapped_as_they_lie() -> None:
    """Torgerson 1952: classical scaling gives back plane points up to turns, so all distances are kept."""
    points = np.random.default_rng(0).normal(size=(12, 2)) * [9, 4]

    positions, shown = m.scale_down(squareform(pdist(points)))

    assert pdist(positions) == pytest.approx(pdist(points), abs=1e-9)
    assert shown == pytest.approx(1, abs=1e-9)
    assert positions[:, 0].var() > positions[:, 1].var()


def test_everything_is_json() -> None:
    told = m.compare([palette(scattered(i)) for i in range(3)], ["a", "<b>", "c"]).as_dict()

    assert json.loads(json.dumps(told, allow_nan=False))["names"] == ["a", "<b>", "c"]


def test_one_palette_is_not_compared() -> None:
    with pytest.raises(InputError, match="two palettes or more"):
        m.compare([palette(scattered(1))], ["a"])
