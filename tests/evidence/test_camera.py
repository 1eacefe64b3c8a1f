"""The camera-like family: no change at zero, known laws, and no fold anywhere."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.evidence.camera import NAMES, SIZE, CameraMap, render
from hueferry.evidence.prior import no_change
from hueferry.evidence.sensitivities import sensitivities

COLOURS = linear_srgb_to_oklab(np.random.default_rng(0).random((400, 3)))


def named(**values: float) -> CameraMap:
    return CameraMap(np.array([values.get(name, 0.0) for name in NAMES]))


def test_all_zeros_moves_nothing() -> None:
    assert CameraMap(np.zeros(SIZE))(COLOURS) == pytest.approx(COLOURS, abs=1e-12)


def test_equal_gains_are_an_exposure_in_linear_light() -> None:
    """One stop doubles linear light."""
    stop = np.log(2.0)

    carried = named(gain_red=stop, gain_green=stop, gain_blue=stop)(COLOURS)

    assert oklab_to_linear_srgb(carried) == pytest.approx(2 * oklab_to_linear_srgb(COLOURS), rel=1e-9, abs=1e-12)


def test_chroma_and_turn_are_a_scaling_and_a_rotation() -> None:
    carried = named(chroma=np.log(1.3), turn=0.2)(COLOURS)

    before, after = COLOURS[:, 1] + 1j * COLOURS[:, 2], carried[:, 1] + 1j * carried[:, 2]
    assert after == pytest.approx(before * 1.3 * np.exp(0.2j), abs=1e-12)
    assert carried[:, 0] == pytest.approx(COLOURS[:, 0], abs=1e-12)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.floats(-4, 4), min_size=SIZE, max_size=SIZE))
def test_no_member_of_the_family_folds(deviations: list[float]) -> None:
    map_ = CameraMap(np.array(deviations) * no_change().deviations)
    inside = COLOURS[(COLOURS[:, 0] > 0.1) & (oklab_to_linear_srgb(COLOURS).min(axis=1) > 0.01)]

    step = 1e-6
    columns = [(map_(inside + step * axis) - map_(inside - step * axis)) / (2 * step) for axis in np.eye(3)]

    assert (np.linalg.det(np.stack(columns, axis=2)) > 0).all()


@settings(max_examples=60, deadline=None)
@given(st.lists(st.floats(-4, 4), min_size=SIZE, max_size=SIZE))
def test_grays_keep_their_order(deviations: list[float]) -> None:
    ramp = np.stack([np.linspace(0, 1.2, 4096), np.zeros(4096), np.zeros(4096)], axis=1)

    carried = CameraMap(np.array(deviations) * no_change().deviations)(ramp)

    assert (np.diff(carried[:, 0]) >= -1e-12).all()
    assert np.isfinite(carried).all()


@pytest.mark.parametrize("seed", range(12))
def test_sensitivities_are_the_slope_between_two_renderings(seed: int) -> None:
    """Central differences of the renderings have an error of the order of the step squared."""
    rng = np.random.default_rng(seed)
    parameters = rng.normal(0, 1, SIZE) * no_change().deviations * (0.0 if seed == 0 else 1.0)
    parameters[3] += 0.0 if seed else 1e-3  # at 0 the shoulder changes its formula
    light = np.concatenate([rng.random((200, 3)) * 1.3, [[0.001, 0.002, 0.001], [2.0, 1.8, 1.5]]])

    base, slopes = sensitivities(parameters, light)

    assert base == pytest.approx(render(parameters, light), abs=1e-12)
    for number, slope in enumerate(slopes):
        step = 1e-6 * np.eye(SIZE)[number]
        central = (render(parameters + step, light) - render(parameters - step, light)) / 2e-6
        assert pytest.approx(central, abs=1e-6) == slope.T, NAMES[number]


def test_parameters_beyond_their_bounds_move_nothing_and_black_has_finite_slopes() -> None:
    parameters = np.zeros(SIZE)
    parameters[NAMES.index("lift")] = 1.0

    _, slopes = sensitivities(parameters, np.zeros((1, 3)))

    assert not slopes[NAMES.index("lift")].any()
    assert np.isfinite(slopes).all()
