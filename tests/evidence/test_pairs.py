"""Pairs: known geometry comes back, and what only looks alike is refused."""

import cv2
import numpy as np
import pytest

from evidence.scenes import CAST, picture_of, relit, textured
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_linear_srgb
from hueferry.evidence.keypoints import match
from hueferry.evidence.pairs import Pairs, find_homography, find_pairs
from hueferry.evidence.reduced import Reduced, reduce_picture


def reduced(pixels: np.ndarray) -> Reduced:
    return reduce_picture(picture_of(pixels))


def test_a_known_turn_and_scale_come_back_across_a_change_of_light() -> None:
    scene = textured(0)
    turn = cv2.getRotationMatrix2D((200, 150), 6, 1.1)
    other = relit(cv2.warpAffine(scene, turn, (400, 300), borderMode=cv2.BORDER_REFLECT))

    pairs = find_pairs(reduced(scene), reduced(other))

    assert isinstance(pairs, Pairs)
    corners = np.array([[100, 80, 1], [300, 80, 1], [100, 220, 1], [300, 220, 1.0]])
    carried = corners @ pairs.homography.T
    assert carried[:, :2] / carried[:, 2:] == pytest.approx(corners @ turn.T, abs=0.7)


def test_pairs_hold_the_colours_of_the_same_surface() -> None:
    """Gains in linear light are known in closed form, so every pair can be checked."""
    scene = textured(1)

    pairs = find_pairs(reduced(scene), reduced(relit(scene)))

    assert pairs is not None
    light = oklab_to_linear_srgb(pairs.source)
    unclipped = ~(pairs.low | pairs.high).any(axis=1)
    wanted = linear_srgb_to_oklab(light * CAST)
    error = np.linalg.norm(pairs.reference - wanted, axis=1)[unclipped]
    assert np.median(error) < 0.004
    assert np.quantile(error, 0.95) < 0.02
    assert pairs.coverage > 0.98


def test_different_scenes_have_no_pairs() -> None:
    scenes = [reduced(textured(seed)) for seed in range(2, 8)]

    found = [find_pairs(a, b) for i, a in enumerate(scenes) for b in scenes[i + 1 :]]

    assert found == [None] * 15


def test_matches_by_chance_are_no_homography() -> None:
    rng = np.random.default_rng(0)

    for _ in range(20):
        here, there = rng.uniform(0, [400, 300], (2, 60, 2))
        assert find_homography(here, there, (300, 400)) is None


def test_a_mirror_is_refused() -> None:
    here = np.random.default_rng(1).uniform(0, [400, 300], (80, 2))
    there = here * [-1, 1] + [400, 0]

    assert find_homography(here, there, (300, 400)) is None


def test_points_in_one_spot_are_one_witness() -> None:
    here = np.random.default_rng(2).uniform(0, 4, (80, 2)) + 100

    assert find_homography(here, here + 20, (300, 400)) is None


def test_matching_nothing_gives_nothing() -> None:
    flat, scene = reduced(np.full((100, 100, 3), 90, np.uint8)), reduced(textured(8))

    assert len(match(flat.keypoints, scene.keypoints)[0]) == 0
    assert find_pairs(flat, scene) is None


def test_a_caption_common_to_two_pictures_is_not_their_surface() -> None:
    first, second = textured(9), textured(10)
    for picture in (first, second):
        cv2.rectangle(picture, (0, 240), (400, 300), (20, 20, 20), -1)
        cv2.putText(picture, "Marrowfield Tileworks 17", (8, 280), cv2.FONT_HERSHEY_TRIPLEX, 0.9, (230, 230, 230), 1)

    assert find_pairs(reduced(first), reduced(second)) is None


def test_what_stands_in_front_is_left_out() -> None:
    scene = textured(11)
    hidden = relit(scene)
    hidden[60:240, 120:280] = textured(12)[60:240, 120:280]

    pairs = find_pairs(reduced(scene), reduced(hidden))

    assert pairs is not None
    light = oklab_to_linear_srgb(pairs.source)
    error = np.linalg.norm(pairs.reference - linear_srgb_to_oklab(light * CAST), axis=1)
    assert (error[~(pairs.low | pairs.high).any(axis=1)] < 0.03).mean() > 0.85
