"""One solution for a series: a map a picture, what it rests on, and which pictures belong together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import attrs
import numpy as np

from hueferry.errors import InputError
from hueferry.evidence.agree import agree, identity
from hueferry.evidence.camera import NAMES, SIZE, CameraMap, Parameters
from hueferry.evidence.evidence import Basis, Evidence
from hueferry.evidence.prior import Prior, no_change
from hueferry.evidence.reduced import Reduced
from hueferry.maps.protocol import Map
from hueferry.palettes.palette import Palette
from hueferry.series.candidates import Pair, canonical_order
from hueferry.series.groups import Labels, components, medoid, remoteness
from hueferry.series.joint import JointFit, solve_joint
from hueferry.series.links import Link, Spread, find_links
from hueferry.series.verdicts import Judged, evidence_of, judge
from hueferry.series.views import View

LEAST_GAIN = 0.1
"""ΔE00 by which a map must bring a picture nearer to those it is linked with."""

REMOTE = 4.0
"""Robust deviations from the middle of the series beyond which a picture without links is an outlier."""

UNFIT = 0.15
"""Trust in all the links of a picture below which they do not fit the series: an outlier."""


@attrs.frozen(eq=False, kw_only=True)
class FrameSolution:
    """What is to be done with one picture.

    Attributes:
        name: of the picture.
        map: Oklab to Oklab; moves nothing where `evidence.basis` is `none`.
        evidence: what it rests on.
        links: how many pictures it shares surfaces with, references among them.
        residual: mean ΔE00 left between it and those, or None without links.
        group: number of its group, 0 … ; pictures of a group are joined by links.
        outlier: whether it stands apart from the series; outliers are left alone.
        sentence: what was done and why.
    """

    name: str
    map: Map
    evidence: Evidence
    links: int
    residual: float | None
    group: int
    outlier: bool
    sentence: str


@attrs.frozen(eq=False, kw_only=True)
class Solution:
    """What is to be done with a series.

    Attributes:
        frames: one a picture, in the order in which they were given.
        groups: names of the pictures of each group, in the order of names; single pictures are groups of one.
        outliers: names of pictures that stand apart.
        candidates: links found, all pictures and references counted.
        sentences: the series in words.
    """

    frames: tuple[FrameSolution, ...]
    groups: tuple[tuple[str, ...], ...]
    outliers: tuple[str, ...]
    links: int
    sentences: tuple[str, ...]


@attrs.frozen(eq=False)
class _Series:
    """The pictures in the order of names, the references behind them, and what was found between them."""

    views: Sequence[View]
    pictures: int
    targets: Sequence[Reduced | Palette]
    links: Mapping[Pair, Link]
    labels: Labels

    @property
    def references(self) -> range:
        return range(self.pictures, len(self.views))

    @property
    def anchored(self) -> set[int]:
        """Groups that hold a reference."""
        return {int(self.labels[index]) for index in self.references}


def solve_series(
    pictures: Sequence[View],
    *,
    references: Sequence[View] = (),
    palette: Palette | None = None,
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
        spread: shares out the search for links; None does it here.
        links: links that were found before, by indices into (pictures in `canonical_order`, then references).

    Raises:
        InputError: no picture, or two of one name.
    """
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
    series = _Series(views, len(pictures), targets or ([palette] if palette is not None else []), links, labels)
    frames, words = _solve(series)
    return Solution(
        frames=tuple(frames[order.index(index)] for index in range(len(pictures))),
        groups=_named_groups(series),
        outliers=tuple(frame.name for frame in frames if frame.outlier),
        links=len(links),
        sentences=words,
    )


def _solve(series: _Series) -> tuple[list[FrameSolution], tuple[str, ...]]:
    priors = _priors(series)
    fixed, base = _gauge(series)
    fit = solve_joint(series.links, priors, fixed)
    judged = judge(series.views, series.links, fit, priors)
    frames = [_frame(series, index, fit, judged[index], base) for index in range(series.pictures)]
    return frames, _words(series, frames, base)


def _priors(series: _Series) -> list[Prior]:
    """Exposure values bear witness where there is one reference, and it has one."""
    known = [series.views[index].exposure for index in series.references]
    told = known[0] if len(known) == 1 else None
    return [no_change(source_exposure=view.exposure, reference_exposure=told) for view in series.views]


def _gauge(series: _Series) -> tuple[dict[int, Parameters], int | None]:
    """Return the parameters of every picture that stays fixed, and the picture that serves as reference, if one."""
    fixed: dict[int, Parameters] = {index: np.zeros(SIZE) for index in series.references}
    targets, base = series.targets, None
    sizes = np.bincount(series.labels)
    for label in np.argsort(-sizes, kind="stable"):
        if int(label) in series.anchored:
            continue
        middle = medoid(series.views, np.flatnonzero(series.labels == label))
        if not targets:
            fixed[middle], base = np.zeros(SIZE), middle
            targets = [series.views[middle].unpack()]
        elif sizes[label] > 1:
            fixed[middle] = _supported(series.views[middle], targets)
    return fixed, base


def _supported(view: View, targets: Sequence[Reduced | Palette]) -> Parameters:
    evidence = agree(view.unpack(), targets)[1]
    if evidence.basis is Basis.NONE:
        return np.zeros(SIZE)
    return np.array([evidence.camera[name] for name in NAMES])


def _frame(series: _Series, index: int, fit: JointFit, judged: Judged, base: int | None) -> FrameSolution:
    view = series.views[index]
    if index == base:
        return _left(view, "this is what the others are brought towards", judged, int(series.labels[index]))
    if not judged.links:
        return _alone(series, index, base)
    label = int(series.labels[index])
    if judged.trust < UNFIT:
        reason = f"what it shares with others differs from them by {judged.after:.1f} ΔE00 whatever one map does"
        return _left(view, reason, judged, label, outlier=True)
    if judged.before - judged.after < LEAST_GAIN:
        reason = f"it already agrees with the {judged.links} pictures it shares surfaces with"
        return _left(view, f"{reason}, within {judged.before:.1f} ΔE00", judged, label)
    map_ = CameraMap(fit.parameters[index])
    evidence = evidence_of(map_, judged)
    return FrameSolution(
        name=view.name, map=map_, evidence=evidence, links=judged.links, residual=judged.after,
        group=label, outlier=False, sentence=evidence.decision,
    )  # fmt: skip


def _alone(series: _Series, index: int, base: int | None) -> FrameSolution:
    view, label = series.views[index], int(series.labels[index])
    if remoteness(series.views)[index] > REMOTE:
        reason = "it shares no surface with any other picture, and its colours stand apart from the series"
        return _left(view, reason, None, label, outlier=True)
    targets = series.targets if base is None else [series.views[base].unpack()]
    map_, evidence = agree(view.unpack(), targets)
    sentence = f"No surface is shared with another picture of the series. {evidence.decision}"
    return FrameSolution(
        name=view.name, map=map_, evidence=attrs.evolve(evidence, decision=sentence), links=0, residual=None,
        group=label, outlier=False, sentence=sentence,
    )  # fmt: skip


def _left(view: View, reason: str, judged: Judged | None, group: int, *, outlier: bool = False) -> FrameSolution:
    sentence = f"Nothing was changed: {reason}."
    before = None if judged is None or not judged.links else judged.before
    evidence = Evidence(
        basis=Basis.NONE, decision=sentence, expected_error=before or 0.0, judged_before=before, judged_after=before
    )
    return FrameSolution(
        name=view.name, map=identity(), evidence=evidence, links=0 if judged is None else judged.links,
        residual=before, group=group, outlier=outlier, sentence=sentence,
    )  # fmt: skip


def _named_groups(series: _Series) -> tuple[tuple[str, ...], ...]:
    members = [np.flatnonzero(series.labels == label) for label in range(int(series.labels.max()) + 1)]
    return tuple(tuple(series.views[int(i)].name for i in group if i < series.pictures) for group in members)


def _words(series: _Series, frames: Sequence[FrameSolution], base: int | None) -> tuple[str, ...]:
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
