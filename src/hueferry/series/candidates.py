"""Which pictures of a series are looked at together: a sparse graph by name, time, content and palette."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from hueferry.series.views import View

Pair = tuple[int, int]

NEXT = (1, 2, 3)
"""Steps along the order of names, and along the order of time."""

LIKE = 4
"""Partners of every picture by likeness of its keypoints."""

NEAR = 1
"""Partners of every picture by nearness of its palette."""

ANCHORED = 24
"""Partners of every reference by likeness: most hangs on its links."""

AGAIN = 6
"""Further partners of a picture that found none."""


def canonical_order(views: Sequence[View]) -> list[int]:
    """Return indices in the natural order of names (2 before 10): no result depends on the order of the files."""
    return sorted(range(len(views)), key=lambda index: _natural(views[index].name))


def candidate_pairs(views: Sequence[View], *, anchors: Iterable[int] = ()) -> list[Pair]:
    """Return pairs (i < j) worth looking at, about seven a picture.

    Args:
        views: the pictures.
        anchors: indices of references; each gets `ANCHORED` partners more.
    """
    pairs: set[Pair] = set()
    _add_steps(pairs, canonical_order(views))
    _add_steps(pairs, _in_time(views))
    likeness = np.stack([view.signature for view in views])
    anchored = set(anchors)
    _add_best(pairs, likeness, {index: ANCHORED if index in anchored else LIKE for index in range(len(views))})
    _add_near(pairs, np.stack([view.palette for view in views]))
    return sorted(pairs)


def further_pairs(views: Sequence[View], lonely: Sequence[int], tried: Iterable[Pair]) -> list[Pair]:
    """Return more pairs for pictures that found no partner: the next `AGAIN` by likeness."""
    done = set(tried)
    likeness = np.stack([view.signature for view in views])
    pairs: set[Pair] = set()
    for index in lonely:
        fresh = [other for other in _ranked(likeness, index) if _pair(index, other) not in done]
        pairs.update(_pair(index, other) for other in fresh[:AGAIN])
    return sorted(pairs)


def bridging_pairs(views: Sequence[View], labels: NDArray[np.int64], tried: Iterable[Pair]) -> list[Pair]:
    """Return pairs that may join groups: for every group, its `AGAIN` likest pairs with pictures outside.

    Args:
        views: the pictures.
        labels: (n,) group of each; of the largest group nothing is asked, for the others ask it.
        tried: pairs that were looked at already.
    """
    done = set(tried)
    likeness = np.stack([view.signature for view in views])
    largest = int(np.bincount(labels).argmax())
    pairs: set[Pair] = set()
    for label in np.unique(labels):
        inside = np.flatnonzero(labels == label)
        if label == largest or len(inside) < 2:
            continue
        best = likeness[inside] @ likeness.T
        best[:, inside] = -1.0
        flat = np.argsort(-best, axis=None, kind="stable")[: 4 * AGAIN]
        found = [_pair(int(inside[row]), int(column)) for row, column in zip(*np.divmod(flat, len(views)), strict=True)]
        pairs.update([pair for pair in dict.fromkeys(found) if pair not in done][:AGAIN])
    return sorted(pairs)


def _natural(name: str) -> tuple[tuple[int, int, str], ...]:
    parts = re.findall(r"[0-9]+|[^0-9]+", name)
    return (*((0, int(part), part) if part[0].isdecimal() else (1, 0, part) for part in parts), (2, 0, name))


def _in_time(views: Sequence[View]) -> list[int]:
    known = [index for index in canonical_order(views) if views[index].taken is not None]
    return sorted(known, key=lambda index: views[index].taken or 0.0)


def _add_steps(pairs: set[Pair], order: Sequence[int]) -> None:
    for step in NEXT:
        pairs.update(_pair(one, other) for one, other in zip(order, order[step:], strict=False))


def _add_best(pairs: set[Pair], likeness: NDArray[np.float32], wanted: dict[int, int]) -> None:
    """Add the likest partners of each, by cosine; 512 multiplications a pair of pictures."""
    for index, count in wanted.items():
        pairs.update(_pair(index, other) for other in _ranked(likeness, index)[:count])


def _ranked(likeness: NDArray[np.float32], index: int) -> list[int]:
    """Return up to 64 others, the likest first, among those with any keypoint."""
    scores = likeness @ likeness[index]
    scores[index] = -1.0
    some = np.argpartition(-scores, min(64, len(scores) - 1))[:64]
    some = some[np.argsort(-scores[some], kind="stable")]
    return [int(other) for other in some if scores[other] > 0]


def _add_near(pairs: set[Pair], keys: NDArray[np.float64]) -> None:
    from scipy.spatial import cKDTree

    found = cKDTree(keys).query(keys, k=min(NEAR + 1, len(keys)))[1]
    for index, others in enumerate(np.atleast_2d(found.reshape(len(keys), -1))):
        pairs.update(_pair(index, int(other)) for other in others if other != index)


def _pair(one: int, other: int) -> Pair:
    return (one, other) if one < other else (other, one)
