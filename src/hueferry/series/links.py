"""Links: two pictures of a series show the same surfaces, and here are their colours."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights, read_only
from hueferry.evidence.dense import read_colours
from hueferry.evidence.keypoints import match
from hueferry.evidence.pairs import carry, find_homography
from hueferry.evidence.reduced import Reduced
from hueferry.series.candidates import Pair, bridging_pairs, candidate_pairs, further_pairs
from hueferry.series.views import View

KEPT = 240
"""Pairs of colours kept of a link."""

FEWEST = 40
"""Pairs of colours below which there is no link."""

PER_BLOCK = 2.5
"""Independent pairs that one block of a picture is worth at most: neighbours err alike, and so do links."""

Finder = Callable[[View, View], "Link | None"]
Spread = Callable[[Sequence[tuple[View, View]]], Iterable["Link | None"]]
"""Looks at many pairs of views, in any processes, and gives back what `find_link` gives, in their order."""


@attrs.frozen(eq=False)
class Link:
    """Colours of the same surfaces in two pictures.

    Attributes:
        first: (n, 3) Oklab in the first picture.
        second: (n, 3) Oklab of the same surfaces in the second.
        out: (n, 2) how far each lies from the middle of the first, and of the second picture: the square of the
            distance, 1 in the corners.
        weights: (n,) trust; they sum to the number of independent pairs that these are worth.
        coverage: share of the first picture that the second shows, 0 … 1.
        inliers: keypoints explained.
    """

    first: Colours = attrs.field(converter=read_only)
    second: Colours = attrs.field(converter=read_only)
    out: NDArray[np.float64] = attrs.field(converter=read_only)
    weights: Weights = attrs.field(converter=read_only)
    coverage: float
    inliers: int

    def __len__(self) -> int:
        return len(self.first)


def find_link(first: View, second: View) -> Link | None:
    """Look for surfaces common to two pictures; None where chance explains the likeness as well."""
    here, there = match(first.keypoints, second.keypoints)
    found = find_homography(here, there, second.flags.shape)
    if found is None:
        return None
    homography, inside, _ = found
    ours, theirs = _unclipped(first.unpack()), _unclipped(second.unpack())
    dense = read_colours(ours, theirs, homography)
    if dense is None:
        return None
    ended = (dense.low | dense.high).any(axis=1)
    kept = _thinned(np.flatnonzero(~ended))
    if len(kept) < FEWEST:
        return None
    weights, places = dense.weights[kept], dense.places[kept].astype(np.float64)
    worth = min(PER_BLOCK * len(np.unique(dense.blocks[kept])), float(len(kept)))
    return Link(
        first=dense.source[kept],
        second=dense.reference[kept],
        out=np.column_stack(
            [_out(places, first.flags.shape), _out(carry(dense.homography, places), second.flags.shape)]
        ),
        weights=weights * (worth / weights.sum()),
        coverage=dense.coverage,
        inliers=int(inside.sum()),
    )


def find_links(views: Sequence[View], *, anchors: Iterable[int] = (), spread: Spread | None = None) -> dict[Pair, Link]:
    """Find the links of a series: candidates first, then second looks for pictures and groups that stand apart.

    Args:
        views: the pictures, references among them.
        anchors: indices of references.
        spread: does the looking, so that it can be shared out over processes; None does it here.

    Returns:
        Links by (i, j), i < j, in sorted order.
    """
    from hueferry.series.groups import components

    look = _here if spread is None else spread
    tried: list[Pair] = candidate_pairs(views, anchors=anchors)
    links = dict(_looked(views, tried, look))
    lonely = sorted(set(range(len(views))) - {index for pair in links for index in pair})
    more = further_pairs(views, lonely, tried)
    links.update(_looked(views, more, look))
    tried.extend(more)
    links.update(_looked(views, bridging_pairs(views, components(len(views), links), tried), look))
    return dict(sorted(links.items()))


def _looked(views: Sequence[View], pairs: Sequence[Pair], look: Spread) -> Iterator[tuple[Pair, Link]]:
    found = look([(views[i], views[j]) for i, j in pairs])
    return ((pair, link) for pair, link in zip(pairs, found, strict=True) if link is not None)


def _here(pairs: Sequence[tuple[View, View]]) -> Iterator[Link | None]:
    return (find_link(first, second) for first, second in pairs)


def _unclipped(reduced: Reduced) -> Reduced:
    """Leave out what is clipped and its neighbourhood, unless too little would be left."""
    from scipy.ndimage import maximum_filter

    clipped = maximum_filter(reduced.clipped, size=5)
    usable = reduced.usable & ~clipped
    return attrs.evolve(reduced, usable=usable) if usable.sum() > 1000 else reduced


def _out(places: NDArray[np.float64], shape: tuple[int, ...]) -> NDArray[np.float64]:
    """Return the (n,) squared distance of (n, 2) pixels (x, y) from the middle, 1 in the corners."""
    middle = (np.array([shape[1], shape[0]]) - 1) / 2
    return np.asarray(((places - middle) ** 2).sum(axis=1) / max(float(middle @ middle), 1.0))


def _thinned(places: NDArray[np.int64]) -> NDArray[np.int64]:
    """Draw at most `KEPT` places, the same each time."""
    if len(places) <= KEPT:
        return places
    return np.sort(np.random.default_rng(0).choice(places, KEPT, replace=False))
