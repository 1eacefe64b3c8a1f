"""Palettes where no surface is seen twice: the same stuff in other places, saved palettes, strangers."""

import numpy as np
import pytest

from evidence.scenes import CAST, picture_of, relit
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_lab, oklab_to_linear_srgb
from hueferry.evidence.agree import agree
from hueferry.evidence.blocks import content_of
from hueferry.evidence.evidence import Basis
from hueferry.evidence.prior import no_change
from hueferry.evidence.reduced import reduce_picture
from hueferry.evidence.registration import explained, register
from hueferry.palettes.build import palette_of
from hueferry.palettes.palette import Palette


def tiles(seed: int, *, hue: float = 0.0) -> np.ndarray:
    """A wall of glazed tiles: eight glazes in random order, shaded and grained; `hue` makes other glazes."""
    rng = np.random.default_rng(seed)
    kinds = np.random.default_rng(99)
    angle, chroma = kinds.uniform(0, 2 * np.pi, 8) + hue, kinds.uniform(0.02, 0.12, 8)
    glazes = np.stack([kinds.uniform(0.35, 0.8, 8), chroma * np.cos(angle), chroma * np.sin(angle)], axis=1)
    wall = np.kron(rng.integers(0, 8, (12, 16)), np.ones((20, 20), dtype=int))
    colours = glazes[wall] + rng.normal(0, 0.006, (*wall.shape, 3))
    colours[:, :, 0] *= 1 + 0.05 * np.sin(np.linspace(0, 3, wall.shape[0]))[:, None]
    from hueferry.colour.transfer import linear_to_srgb

    codes = linear_to_srgb(np.clip(oklab_to_linear_srgb(colours), 0, 1))
    return np.asarray(np.rint(codes * 255), dtype=np.uint8)


def left_over(map_: object, pixels: np.ndarray, gains: np.ndarray) -> tuple[float, float]:
    """Mean ΔE00 to the colours under `gains`, before and after the map."""
    from hueferry.colour.transfer import srgb_to_linear

    before = linear_srgb_to_oklab(srgb_to_linear(pixels.reshape(-1, 3)[::37] / 255.0))
    wanted = oklab_to_lab(linear_srgb_to_oklab(oklab_to_linear_srgb(before) * gains))
    scores = [float(delta_e_2000(oklab_to_lab(found), wanted).mean()) for found in (before, map_(before))]
    return scores[0], scores[1]


def test_the_same_stuff_in_another_order_tells_the_light() -> None:
    source, reference = tiles(1), relit(tiles(2), CAST)

    map_, evidence = agree(picture_of(source), [picture_of(reference)])

    before, after = left_over(map_, source, CAST)
    assert evidence.basis is Basis.PALETTE
    assert after < 0.5 * before
    assert evidence.palette_share > 0.5


def test_other_stuff_tells_nothing() -> None:
    _, evidence = agree(picture_of(tiles(1)), [picture_of(relit(tiles(2, hue=2.0), CAST))])

    assert evidence.basis is Basis.NONE
    assert "content explains" in evidence.decision


def test_a_saved_palette_of_the_same_stuff_is_heard() -> None:
    source, reference = tiles(1), palette_of(picture_of(relit(tiles(2), CAST)))

    map_, evidence = agree(picture_of(source), [reference])

    before, after = left_over(map_, source, CAST)
    assert evidence.basis is Basis.PALETTE
    assert after < 0.8 * before


def test_a_palette_of_one_colour_says_nothing() -> None:
    _, evidence = agree(picture_of(tiles(1)), [Palette(np.array([[0.5, 0.1, 0.0]]), np.ones(1))])

    assert evidence.basis is Basis.NONE


def test_a_scene_registered_with_itself_does_not_move() -> None:
    scene = reduce_picture(picture_of(tiles(3))).scene

    found = register(scene, scene, no_change())

    assert np.abs(found / no_change().deviations).max() < 0.05
    assert explained(scene, scene, found) > 0.8


def test_content_that_varies_over_the_picture_counts_for_more_doubt() -> None:
    even, uneven = tiles(4), tiles(4)
    uneven[:, 160:] = tiles(5, hue=1.0)[:, 160:]

    doubts = [np.trace(content_of(reduce_picture(picture_of(pixels)).scene).scatter) for pixels in (even, uneven)]

    assert doubts[1] > 2 * doubts[0]


def test_halvings_cut_every_picture_into_two_of_like_size() -> None:
    scene = reduce_picture(picture_of(tiles(6))).scene

    sizes = [(len(first), len(second)) for first, second in scene.halvings()]

    assert len(sizes) == 4
    assert all(sum(pair) == len(scene) for pair in sizes)
    assert min(min(pair) for pair in sizes) == pytest.approx(len(scene) / 2, rel=0.15)
