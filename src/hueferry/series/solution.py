"""One solution for a series: a map a picture, what it rests on, and which pictures belong together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import attrs
import numpy as np

from hueferry.errors import InputError
from hueferry.evidence.reduced import Reduced
from hueferry.palettes.palette import Palette
from hueferry.series.candidates import Pair, canonical_order
from hueferry.series.frames import FrameSolution, decide, steady
from hueferry.series.gauge import LinkedSeries, fix_gauge, priors_of
from hueferry.series.groups import components
from hueferry.series.joint import JointFit, solve_joint
from hueferry.series.links import Link, Spread, find_links
from hueferry.series.verdicts import Judged, judge
from hueferry.series.views import View


@attrs.frozen(eq=False, kw_only=True)
class Solution:
    """What is to be done with a series.

    Attributes:
        frames: one a picture, in the order in which they were given.
        groups: names of the pictures of each group, in the order of names; single pictures are groups of one.
        outliers: names of pictures that stand apart.
        links: how many links were found, references counted.
        falloff: how much darker corners are than the middle, as a share of Oklab lightness.
        sentences: the series in words.
        base: name of the picture that the others were brought towards, where there was no reference; else None.
    """

    frames: tuple[FrameSolution, ...]
    groups: tuple[tuple[str, ...], ...]
    outliers: tuple[str, ...]
    links: int
    falloff: float
    sentences: tuple[str, ...]
    base: str | None = None


def solve_series(
    pictures: Sequence[View],
    *,
    references: Sequence[View] = (),
    palette: Palette | None = None,
    time_lapse: bool = False,
    spread: Spread | None = None,
    links: Mapping[Pair, Link] | None = None,
) -> Solution:
    """Find the maps that bring a series together.

    Pictures that share surfaces, with a reference or by way of others, are solved as one. A group that has no way to
    a reference stays together, and moves as a whole by what the palette of its middle picture supports; so does a
    picture without links. Without any reference the picture nearest to the middle of the largest group is the one.

    Args:
        pictures: views of the pictures, in any order; names are distinct.
        references: views of pictures that stay as they are and that the series is brought towards.
        palette: what it is brought towards where there is no reference picture.
        time_lapse: take out flicker alone, and keep what changes slowly; nothing is brought towards a reference.
        spread: shares out the search for links; None does it here.
        links: links that were found before, by indices into (pictures in `canonical_order`, then references).

    Raises:
        InputError: no picture, two of one name, or a reference for a time-lapse.
    """
    if time_lapse and (references or palette is not None):
        raise InputError("a time-lapse keeps its own slow changes and follows no reference; leave the reference out")
    if not pictures:
        raise InputError("there is no picture to bring together; give at least one")
    if len({view.name for view in pictures}) < len(pictures):
        raise InputError("two pictures of the series have the same name; give each a name of its own")
    order = canonical_order(pictures)
    views = [*(pictures[index] for index in order), *references]
    if links is None:
        links = find_links(views, anchors=range(len(pictures), len(views)), spread=spread)
    labels = components(len(views), links)
    targets: list[Reduced | Palette] = [view.unpack() for view in references]
    series = LinkedSeries(views, len(pictures), targets or ([palette] if palette is not None else []), links, labels)
    fixed, base = fix_gauge(series)
    priors = priors_of(series)
    fit = solve_joint(links, priors, fixed)
    judged = judge(views, links, fit, priors)
    base = None if time_lapse else base
    frames = _steadied(series, fit, judged) if time_lapse else _decided(series, fit, judged, base)
    return Solution(
        frames=tuple(frames[place] for place in np.argsort(order)),
        groups=_named_groups(series),
        outliers=tuple(frame.name for frame in frames if frame.outlier),
        links=len(links),
        falloff=fit.falloff,
        sentences=_words(series, frames, base),
        base=None if base is None else views[base].name,
    )


def _decided(series: LinkedSeries, fit: JointFit, judged: Sequence[Judged], base: int | None) -> list[FrameSolution]:
    return [decide(series, index, fit, judged[index], base) for index in range(series.pictures)]


def _steadied(series: LinkedSeries, fit: JointFit, judged: Sequence[Judged]) -> list[FrameSolution]:
    found: dict[int, FrameSolution] = {}
    for label in np.unique(series.labels):
        members = np.flatnonzero(series.labels == label)
        found.update(zip(members.tolist(), steady(series, members, fit, judged), strict=True))
    return [found[index] for index in range(series.pictures)]


def _named_groups(series: LinkedSeries) -> tuple[tuple[str, ...], ...]:
    members = [np.flatnonzero(series.labels == label) for label in range(int(series.labels.max()) + 1)]
    names = [tuple(series.views[int(i)].name for i in group if i < series.pictures) for group in members]
    return tuple(group for group in names if group)


def _words(series: LinkedSeries, frames: Sequence[FrameSolution], base: int | None) -> tuple[str, ...]:
    linked = sum(frame.links > 0 for frame in frames)
    several = [group for group in _named_groups(series) if len(group) > 1]
    words = [f"{linked} of {len(frames)} pictures are joined by {len(series.links)} links and were solved together."]
    if base is not None:
        words.append(f"They were brought towards {series.views[base].name}, the middle of the series.")
    if len(several) > 1:
        sizes = ", ".join(str(len(group)) for group in several)
        words.append(f"They form {len(several)} groups that share no surface ({sizes} pictures).")
    outliers = [frame.name for frame in frames if frame.outlier]
    if outliers:
        words.append(f"Left alone as outliers: {', '.join(outliers)}.")
    return tuple(words)
