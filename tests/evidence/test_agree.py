"""`agree` as a whole: controls, masks, several references, and pictures that say nothing."""

import numpy as np
import pytest

from evidence.scenes import CAST, picture_of, relit, textured
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import linear_srgb_to_oklab, oklab_to_lab
from hueferry.colour.transfer import srgb_to_linear
from hueferry.errors import InputError
from hueferry.evidence.agree import agree
from hueferry.evidence.camera import CameraMap
from hueferry.evidence.evidence import Basis, Evidence
from hueferry.evidence.prior import no_change
from hueferry.evidence.reduced import reduce_picture
from hueferry.evidence.testimony import hear
from hueferry.evidence.witness import combine
from hueferry.maps.protocol import Map

GRID = linear_srgb_to_oklab(np.random.default_rng(0).random((500, 3)) ** 2)
SCENE = textured(11)


def matched(source: np.ndarray, *references: np.ndarray, **controls: object) -> tuple[Map, Evidence]:
    return agree(picture_of(source), [picture_of(reference) for reference in references], **controls)


def colours_of(pixels: np.ndarray) -> np.ndarray:
    return linear_srgb_to_oklab(srgb_to_linear(pixels.reshape(-1, 3) / 255.0))


def apart(first: Map, second: Map, colours: np.ndarray = GRID) -> float:
    """Largest ΔE00 between two maps."""
    return float(delta_e_2000(oklab_to_lab(first(colours)), oklab_to_lab(second(colours))).max())


FLAT = np.full((120, 160, 3), (120, 90, 60), dtype=np.uint8)
TWO = np.where(np.arange(160)[None, :, None] < 80, FLAT, np.uint8(200))
DEGENERATE = {
    "flat": FLAT,
    "one pixel": FLAT[:1, :1],
    "one row": SCENE[:1],
    "white": np.full((120, 160, 3), 255, dtype=np.uint8),
    "black": np.zeros((120, 160, 3), dtype=np.uint8),
    "two colours": TWO,
}


@pytest.mark.parametrize("name", DEGENERATE)
def test_pictures_that_say_nothing_change_nothing_and_say_why(name: str) -> None:
    for map_, evidence in (matched(DEGENERATE[name], SCENE), matched(SCENE, DEGENERATE[name])):
        assert evidence.basis is Basis.NONE
        assert evidence.decision.startswith("Nothing was changed: ")
        assert map_(GRID) == pytest.approx(GRID, abs=1e-12)


def test_an_empty_mask_changes_nothing_and_says_why() -> None:
    map_, evidence = matched(SCENE, relit(SCENE), mask=np.zeros((300, 400), dtype=bool))

    assert "every pixel is masked" in evidence.decision
    assert map_(GRID) == pytest.approx(GRID, abs=1e-12)


def test_a_picture_agrees_with_itself() -> None:
    map_, evidence = matched(SCENE, SCENE)

    assert evidence.basis is Basis.NONE
    assert "already agree" in evidence.decision
    assert evidence.expected_error < 0.1
    assert map_(GRID) == pytest.approx(GRID, abs=1e-12)


def test_a_known_change_of_light_is_undone_and_said_to_be() -> None:
    """The wanted colours follow from the gains in closed form."""
    map_, evidence = matched(SCENE, relit(SCENE))

    inside = GRID[(oklab_to_lab(GRID)[:, 0] > 15) & (oklab_to_lab(GRID)[:, 0] < 80)]
    from hueferry.colour.spaces import oklab_to_linear_srgb

    wanted = linear_srgb_to_oklab(oklab_to_linear_srgb(inside) * CAST)
    error = delta_e_2000(oklab_to_lab(map_(inside)), oklab_to_lab(wanted))
    assert error.mean() < 0.5
    assert evidence.basis is Basis.PAIRS
    assert evidence.pairs > 1000
    assert evidence.judged_after is not None
    assert evidence.judged_before is not None
    assert evidence.judged_after < 0.1 * evidence.judged_before
    assert evidence.pairs_share + evidence.palette_share + evidence.prior_share == pytest.approx(1)


def test_strangers_change_nothing_and_say_so() -> None:
    _, evidence = matched(SCENE, np.clip(textured(12) // 4 + 10, 0, 255).astype(np.uint8))

    assert evidence.basis is Basis.NONE
    assert evidence.expected_error > 2  # the prior's spread: nobody knows the change of light


def proportions(share: float, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """A wall of tiles in two colours, `share` of them in the first, with grain."""
    rng = np.random.default_rng(seed)
    tiles = np.zeros(256, dtype=bool)
    tiles[rng.permutation(256)[: round(256 * share)]] = True
    first = np.kron(tiles.reshape(16, 16), np.ones((15, 20), dtype=bool))
    colours = np.where(first[:, :, None], [180.0, 90.0, 60.0], [70.0, 110.0, 150.0])
    return np.clip(colours + rng.normal(0, 3, colours.shape), 0, 255).astype(np.uint8), first


@pytest.mark.parametrize("gains", [(1.2, 1.0, 0.85), (0.8, 1.0, 1.2), (0.7, 0.7, 0.7), (1.3, 1.25, 1.15)])
def test_proportions_are_not_taken_for_light(gains: tuple[float, float, float]) -> None:
    """80/20 against 20/80 under a known cast: at least 99 % of both land on their own cast colour."""
    source, first = proportions(0.8, seed=1)
    reference, _ = proportions(0.2, seed=2)
    cast = np.array(gains)

    map_, _ = matched(source, relit(reference, cast))

    output = oklab_to_lab(map_(colours_of(source)))
    wanted = oklab_to_lab(colours_of(relit(source, cast)))
    own = np.where(first.reshape(-1, 1), wanted[first.ravel()].mean(axis=0), wanted[~first.ravel()].mean(axis=0))
    other = np.where(first.reshape(-1, 1), wanted[~first.ravel()].mean(axis=0), wanted[first.ravel()].mean(axis=0))
    nearer = np.linalg.norm(output - own, axis=1) < 0.25 * np.linalg.norm(output - other, axis=1)
    assert nearer[first.ravel()].mean() >= 0.99
    assert nearer[~first.ravel()].mean() >= 0.99


def test_keep_neutrals_leaves_grays_gray() -> None:
    ramp = np.stack([np.linspace(0, 1, 256), np.zeros(256), np.zeros(256)], axis=1)

    map_, _ = matched(SCENE, relit(SCENE), keep_neutrals=True)

    assert np.abs(map_(ramp)[:, 1:]).max() < 1e-3
    assert (np.diff(map_(ramp)[:, 0]) > 0).all()


def test_only_tone_and_only_chroma_leave_the_other_alone() -> None:
    tone, chroma = (matched(SCENE, relit(SCENE), only=part)[0] for part in ("tone", "chroma"))

    assert np.array_equal(tone(GRID)[:, 1:], GRID[:, 1:])
    assert np.array_equal(chroma(GRID)[:, 0], GRID[:, 0])
    assert np.abs(tone(GRID) - GRID).max() > 0.01
    assert np.abs(chroma(GRID) - GRID).max() > 0.01


def test_held_colours_stay_within_their_limit() -> None:
    hold = np.zeros((300, 400), dtype=bool)
    hold[100:140, 100:140] = True

    map_, _ = matched(SCENE, relit(SCENE), hold=hold)

    held = colours_of(SCENE[105:135, 105:135])
    assert delta_e_2000(oklab_to_lab(map_(held)), oklab_to_lab(held)).max() <= 1.0


def test_a_masked_border_changes_nothing_to_speak_of() -> None:
    bordered = np.zeros((424, 566, 3), dtype=np.uint8)  # the border is half of the area
    bordered[62:362, 83:483] = SCENE
    mask = np.zeros((424, 566), dtype=bool)
    mask[62:362, 83:483] = True

    plain, _ = matched(SCENE, relit(SCENE))
    masked, _ = matched(bordered, relit(SCENE), mask=mask)
    unmasked, _ = matched(bordered, relit(SCENE))

    inside = colours_of(SCENE)[::40]
    assert apart(plain, masked, inside) < 0.5
    assert apart(plain, unmasked, inside) < 0.5


def test_references_are_heard_together_and_an_outlier_is_not() -> None:
    rng = np.random.default_rng(3)
    references = []
    for _ in range(8):
        top, left = rng.integers(0, 120), rng.integers(0, 160)
        gains = CAST * np.exp(rng.normal(0, 0.02, 3))
        references.append(reduce_picture(picture_of(relit(SCENE[top : top + 180, left : left + 240], gains))))
    orange = reduce_picture(picture_of(relit(SCENE, np.array([1.6, 1.0, 0.4]))))
    source = reduce_picture(picture_of(SCENE))
    inside = colours_of(SCENE)[::200]

    *heard, outlier = [hear(source, reference, no_change()) for reference in [*references, orange]]

    together, disturbed = (combine(some, no_change(), inside) for some in (heard, [*heard, outlier]))

    assert together.influence == pytest.approx([1 / 8] * 8, abs=0.1)
    for left_out in range(8):
        fewer = combine(heard[:left_out] + heard[left_out + 1 :], no_change(), inside)
        assert apart(CameraMap(together.parameters), CameraMap(fewer.parameters), inside) < 1.5
    assert disturbed.influence[-1] < 0.02
    assert apart(CameraMap(together.parameters), CameraMap(disturbed.parameters), inside) < 1.0


def test_the_same_input_gives_the_same_map() -> None:
    half = SCENE[:, :200], relit(SCENE[:, 200:])

    assert np.array_equal(matched(*half)[0](GRID), matched(*half)[0](GRID))


def test_a_gray_picture_gets_tone_alone() -> None:
    gray = np.repeat(SCENE.mean(axis=2).astype(np.uint8)[:, :, None], 3, axis=2)

    map_, evidence = matched(gray, relit(SCENE, np.array([0.6, 0.6, 0.6])))

    assert evidence.basis is Basis.PAIRS
    assert np.array_equal(map_(GRID)[:, 1:], GRID[:, 1:])


def test_as_dict_is_plain() -> None:
    import json

    _, evidence = matched(SCENE, relit(SCENE))

    assert json.loads(json.dumps(evidence.as_dict()))["basis"] == "pairs"


def test_no_reference_and_unknown_parts_are_refused() -> None:
    with pytest.raises(InputError, match="give at least one"):
        agree(picture_of(SCENE), [])
    with pytest.raises(InputError, match="tone or the chroma"):
        matched(SCENE, SCENE, only="hue")
