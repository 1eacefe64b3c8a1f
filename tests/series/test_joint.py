"""The joint solver where the answer is known in closed form, and the graph it works on."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.evidence.camera import NAMES, SIZE, render
from hueferry.evidence.prior import no_change
from hueferry.series.candidates import bridging_pairs, candidate_pairs, canonical_order, further_pairs
from hueferry.series.groups import components
from hueferry.series.joint import solve_joint
from hueferry.series.links import Link
from hueferry.series.timeline import find_trend, steadying_map
from hueferry.series.views import WORDS, View
from series.rendered import picture_oklab, sunset

GAINS = [NAMES.index(name) for name in ("gain_red", "gain_green", "gain_blue")]


def _linked(casts: np.ndarray, span: int, noise: float, falloff: float = 0.0) -> dict[tuple[int, int], Link]:
    """Link pictures of random surfaces whose light was multiplied by exp(casts), each with the next `span`."""
    rng, links = np.random.default_rng(4), {}
    for i in range(len(casts)):
        for j in range(i + 1, min(i + 1 + span, len(casts))):
            oklab = linear_srgb_to_oklab(rng.uniform(0.02, 0.5, (240, 3)))
            out = np.sort(rng.uniform(0, 1, (240, 2)), axis=1)
            seen = [
                linear_srgb_to_oklab(oklab_to_linear_srgb(oklab * (1 - falloff * out[:, [end]])) * np.exp(casts[index]))
                + rng.normal(0, noise, (240, 3))
                for end, index in enumerate((i, j))
            ]
            links[i, j] = Link(seen[0], seen[1], out, np.full(240, 0.2), 0.5, 50)
    return links


@pytest.mark.parametrize(("falloff", "most"), [(0.0, 0.012), (0.06, 0.02)])
def test_a_chain_does_not_drift(falloff: float, most: float) -> None:
    """Gains are undone exactly by their opposites; forty links on they still are, in spite of noise.

    Where corners are darker every surface goes outwards from each picture to the next, as in no real pan: unknown,
    the falloff would add up to 0.8 in Oklab.
    """
    casts = np.random.default_rng(1).normal(0, 0.15, (40, 3))
    casts[0] = 0.0
    fit = solve_joint(_linked(casts, 2, 0.008, falloff), [no_change()] * 40, {0: np.zeros(SIZE)})
    light = np.random.default_rng(2).uniform(0.05, 0.5, (200, 3))
    got = [render(own, light * np.exp(cast)) for own, cast in zip(fit.parameters, casts, strict=True)]
    apart = np.array([np.linalg.norm(one - linear_srgb_to_oklab(light), axis=1).mean() for one in got])
    assert apart.max() < most
    assert abs(fit.falloff - falloff) < 0.003


def test_a_lying_link_is_outvoted() -> None:
    casts = np.random.default_rng(1).normal(0, 0.15, (12, 3))
    casts[0] = 0.0
    links = _linked(casts, 4, 0.004)
    honest = solve_joint(links, [no_change()] * 12, {0: np.zeros(SIZE)})
    true = links[3, 5]
    links[3, 5] = Link(true.first, true.second[::-1], true.out, true.weights, 0.5, 50)
    fit = solve_joint(links, [no_change()] * 12, {0: np.zeros(SIZE)})
    assert fit.trust[list(links).index((3, 5))] < 0.1
    light = np.random.default_rng(2).uniform(0.05, 0.5, (200, 3))
    apart = [
        np.abs(render(a, light) - render(b, light)).mean()
        for a, b in zip(fit.parameters, honest.parameters, strict=True)
    ]
    assert max(apart) < 0.003


def _views(count: int) -> list[View]:
    rng = np.random.default_rng(0)
    views = []
    for index in range(count):
        signature = rng.random(WORDS).astype(np.float32)
        views.append(
            View(
                f"{index}.png",
                None,
                np.zeros((1, 1, 3), np.float16),
                np.zeros((1, 1), np.uint8),
                np.zeros((0, 2), np.float32),
                np.zeros((0, 128), np.float16),
                signature / np.linalg.norm(signature),
                rng.random(8),
                (1, 1),
            )
        )
    return views


@pytest.mark.parametrize("count", [2, 3, 125, 500])
def test_candidates_grow_with_the_pictures_and_not_with_their_square(count: int) -> None:
    views = _views(count)
    pairs = candidate_pairs(views, anchors=[0])
    assert all(i < j for i, j in pairs)
    assert len(set(pairs)) == len(pairs)
    assert len(pairs) <= 8 * count + 24
    assert len(further_pairs(views, [0, count - 1], pairs)) <= 12
    labels = np.arange(count) % 2
    bridges = bridging_pairs(views, labels, pairs)
    assert len(bridges) <= 6
    assert all(labels[i] != labels[j] for i, j in bridges)


def test_names_are_ordered_as_people_count() -> None:
    views = _views(12)
    assert canonical_order(views[::-1]) == list(range(11, -1, -1))


def test_components_are_numbered_by_their_first_picture() -> None:
    assert components(5, [(1, 4), (0, 3)]).tolist() == [0, 1, 2, 0, 1]
    assert components(2, []).tolist() == [0, 1]


def _course(slope: float, flicker: float, count: int = 60) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    times = np.arange(count, dtype=np.float64)
    true = np.zeros((count, SIZE))
    true[:, GAINS] = slope * np.linspace(-0.5, 0.5, count)[:, None]
    noisy = true.copy()
    noisy[:, GAINS] += np.random.default_rng(0).normal(0, flicker, (count, 3))
    return times, true, noisy


def test_a_trend_keeps_a_ramp_and_drops_flicker() -> None:
    colours = linear_srgb_to_oklab(np.random.default_rng(1).uniform(0.05, 0.5, (50, 3)))
    times, true, noisy = _course(0.6, 0.04)
    trend = find_trend(noisy, times, colours)
    slope = np.polyfit(times, trend.parameters[:, 0], 1)[0] / np.polyfit(times, true[:, 0], 1)[0]
    assert trend.terms == 2
    assert abs(slope - 1) < 0.1
    still = find_trend(_course(0.0, 0.04)[2], times, colours)
    assert still.terms == 1
    assert np.ptp(still.parameters, axis=0).max() < 1e-9


def test_a_flash_does_not_bend_the_trend() -> None:
    colours = linear_srgb_to_oklab(np.random.default_rng(1).uniform(0.05, 0.5, (50, 3)))
    times, true, noisy = _course(0.6, 0.01)
    noisy[30, GAINS] += 1.5
    trend = find_trend(noisy, times, colours)
    assert trend.steadiness[30] < 0.05
    assert np.abs(trend.parameters[:, 0] - true[:, 0]).max() < 0.02


def test_steadying_goes_through_the_common_rendering_and_back() -> None:
    rng = np.random.default_rng(3)
    own, smooth = np.zeros(SIZE), np.zeros(SIZE)
    own[GAINS], smooth[GAINS] = rng.normal(0, 0.2, 3), rng.normal(0, 0.2, 3)
    light = rng.uniform(0.05, 0.5, (400, 3))
    map_ = steadying_map(own, smooth, linear_srgb_to_oklab(light))
    wanted = linear_srgb_to_oklab(light * np.exp(own[GAINS] - smooth[GAINS]))
    np.testing.assert_allclose(map_(linear_srgb_to_oklab(light)), wanted, atol=0.004)


@pytest.mark.parametrize("ramp", [0.0, 0.45])
def test_a_time_lapse_loses_its_flicker_and_keeps_its_sunset(ramp: float) -> None:
    """A patch that stays put: frame to frame it flickers by a fifth or less; its light keeps its slope within 10 %."""
    from hueferry.series.solution import solve_series

    shots, views = sunset(21, ramp=ramp)
    found = solve_series(views, time_lapse=True)

    def patch(codes: np.ndarray) -> np.ndarray:
        return picture_oklab(codes).reshape(*codes.shape)[40:60, 90:120].reshape(-1, 3)

    wanted = np.array([patch(shot.wanted).mean(axis=0) for shot in shots])
    before = np.array([patch(shot.taken).mean(axis=0) for shot in shots])
    frames = zip(shots, found.frames, strict=True)
    after = np.array([frame.map(patch(shot.taken)).mean(axis=0) for shot, frame in frames])
    flicker = [np.sqrt((np.diff(one - wanted, axis=0) ** 2).mean()) for one in (before, after)]
    assert flicker[1] <= 0.2 * flicker[0]
    if ramp:
        light, true = (oklab_to_linear_srgb(one).sum(axis=1) for one in (after, wanted))
        times = np.arange(len(shots))
        assert abs(np.polyfit(times, light, 1)[0] / np.polyfit(times, true, 1)[0] - 1) <= 0.1
    else:
        assert (after - wanted).std() <= 0.2 * (before - wanted).std()
