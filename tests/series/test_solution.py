"""The joint solution against rendered truth."""

from __future__ import annotations

import attrs
import numpy as np
import pytest

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.errors import InputError
from hueferry.evidence.evidence import Basis
from hueferry.palettes.palette import Palette
from hueferry.series.candidates import Pair, canonical_order
from hueferry.series.frames import FrameSolution
from hueferry.series.links import Link, find_links
from hueferry.series.solution import Solution, solve_series
from hueferry.series.views import View, view_of
from series.rendered import Shot, error, picture_of


@pytest.fixture(scope="module")
def views(shots: list[Shot]) -> list[View]:
    return [shot.view for shot in shots]


@pytest.fixture(scope="module")
def reference(views: list[View]) -> View:
    return attrs.evolve(views[0], name="reference")


@pytest.fixture(scope="module")
def links(views: list[View], reference: View) -> dict[Pair, Link]:
    pictures = views[1:]
    return find_links([*(pictures[i] for i in canonical_order(pictures)), reference], anchors=[len(pictures)])


@pytest.fixture(scope="module")
def solution(views: list[View], reference: View, links: dict[Pair, Link]) -> Solution:
    return solve_series(views[1:], references=[reference], links=links)


def _apart(one: FrameSolution, other: FrameSolution, view: View) -> float:
    """Mean ΔE00 between what two solutions make of a picture."""
    first, second = (oklab_to_lab(frame.map(view.colours)) for frame in (one, other))
    return float(delta_e_2000(first, second).mean())


def test_every_frame_comes_nearer_to_the_truth_and_all_within_one(shots: list[Shot], solution: Solution) -> None:
    before = np.array([error(shot) for shot in shots[1:]])
    after = np.array([error(shot, frame.map) for shot, frame in zip(shots[1:], solution.frames, strict=True)])
    assert before.mean() > 3
    assert after.mean() <= 1.0
    assert not (after > before + 0.2).any()
    assert all(frame.evidence.basis is Basis.PAIRS and not frame.outlier for frame in solution.frames)
    assert len(solution.groups) == 1


def test_names_in_another_order_change_nothing_visible(views: list[View], reference: View, solution: Solution) -> None:
    new = np.random.default_rng(3).permutation(len(views) - 1)
    renamed = [attrs.evolve(view, name=f"{place}.png") for view, place in zip(views[1:], new, strict=True)]
    other = solve_series(renamed, references=[reference])
    apart = [_apart(a, b, v) for a, b, v in zip(solution.frames, other.frames, views[1:], strict=True)]
    assert max(apart) < 0.3


def test_files_in_another_order_change_not_a_bit(
    views: list[View], reference: View, links: dict[Pair, Link], solution: Solution
) -> None:
    turned = solve_series(views[:0:-1], references=[reference], links=links)
    for one, other, view in zip(solution.frames, turned.frames[::-1], views[1:], strict=True):
        assert one.name == other.name == view.name
        np.testing.assert_array_equal(one.map(view.colours), other.map(view.colours))


@pytest.mark.parametrize("number", [0, 17, 41, -1])
def test_one_link_less_changes_nothing_visible(
    views: list[View], reference: View, links: dict[Pair, Link], solution: Solution, number: int
) -> None:
    gone = list(links)[number]
    left = {pair: link for pair, link in links.items() if pair != gone}
    other = solve_series(views[1:], references=[reference], links=left)
    apart = [_apart(a, b, v) for a, b, v in zip(solution.frames, other.frames, views[1:], strict=True)]
    assert max(apart) < 0.3


def test_a_picture_of_something_else_is_named_and_left_alone(views: list[View]) -> None:
    noise = np.random.default_rng(0).uniform(0, 1, (140, 210, 1)) * np.array([0.9, 0.05, 0.9])
    strange = view_of(picture_of(noise), "zz.png")
    found = solve_series([*views[1:9], strange], references=[views[0]])
    last = found.frames[-1]
    assert found.outliers == ("zz.png",)
    assert last.outlier
    assert last.links == 0
    assert last.evidence.basis is Basis.NONE
    assert last.group != found.frames[0].group
    np.testing.assert_allclose(last.map(strange.colours), strange.colours, atol=1e-9)
    assert "zz.png" in " ".join(found.sentences)


def test_without_reference_the_series_meets_in_its_own_middle(views: list[View]) -> None:
    found = solve_series(views[:10])
    kept = [frame for frame in found.frames if frame.evidence.basis is Basis.NONE]
    assert len(kept) == 1
    assert "what the others are brought towards" in kept[0].sentence
    linked = [frame for frame in found.frames if frame.residual is not None and frame is not kept[0]]
    assert np.mean([frame.residual for frame in linked if frame.residual is not None]) < 2.0


def test_a_palette_alone_never_pulls_a_series_apart(views: list[View]) -> None:
    target = Palette(views[0].colours[::8], np.full(len(views[0].colours[::8]), 1 / len(views[0].colours[::8])))
    found = solve_series(views[1:8], palette=target)
    assert all(frame.links > 0 and (frame.residual or 0.0) < 2.0 for frame in found.frames)


def test_what_cannot_be_asked_is_said(views: list[View]) -> None:
    with pytest.raises(InputError, match="no picture"):
        solve_series([])
    with pytest.raises(InputError, match="same name"):
        solve_series([views[0], views[0]])
    with pytest.raises(InputError, match="time-lapse"):
        solve_series(views[:3], references=[views[3]], time_lapse=True)


def test_a_view_is_small_and_knows_its_colours(views: list[View]) -> None:
    assert max(view.nbytes for view in views) < 1_000_000
    reduced = views[0].unpack()
    assert reduced.gray.shape == views[0].packed.shape[:2]
    np.testing.assert_allclose(reduced.oklab, views[0].packed, atol=1e-3)
