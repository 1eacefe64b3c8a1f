"""What is to be done with one picture of a series, and why."""

from __future__ import annotations

from collections.abc import Sequence

import attrs

from hueferry.evidence.agree import agree, identity
from hueferry.evidence.camera import CameraMap
from hueferry.evidence.evidence import Basis, Evidence
from hueferry.maps.protocol import Map
from hueferry.series.gauge import LinkedSeries
from hueferry.series.groups import Labels, medoid, remoteness
from hueferry.series.joint import JointFit
from hueferry.series.timeline import FEWEST, capture_times, find_trend, steadying_map
from hueferry.series.verdicts import Judged, evidence_of, mean_difference
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


def decide(series: LinkedSeries, index: int, fit: JointFit, judged: Judged, base: int | None) -> FrameSolution:
    """Decide on picture `index` from how it stands to its partners; `base` is the one that serves as reference."""
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


def _alone(series: LinkedSeries, index: int, base: int | None) -> FrameSolution:
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


def steady(series: LinkedSeries, members: Labels, fit: JointFit, judged: Sequence[Judged]) -> list[FrameSolution]:
    """Take flicker out of one group of a time-lapse."""
    views, label = [series.views[int(index)] for index in members], int(series.labels[members[0]])
    if len(members) < FEWEST:
        reason = "it shares surfaces with too few frames to tell flicker from slow change"
        return [_left(view, reason, judged[int(i)], label) for view, i in zip(views, members, strict=True)]
    times = capture_times(views)
    middle = series.views[medoid(series.views, members)]
    trend = find_trend(fit.parameters[members], times, middle.colours[::8])
    frames = []
    for view, index, smooth in zip(views, members, trend.parameters, strict=True):
        map_ = steadying_map(fit.parameters[index], smooth, view.colours)
        moved = mean_difference(map_(view.colours), view.colours)
        sentence = f"Moved by {moved:.1f} ΔE00 on average, to take out flicker; slow change was kept."
        evidence = attrs.evolve(evidence_of(map_, judged[int(index)]), decision=sentence, moved=moved)
        frames.append(
            FrameSolution(
                name=view.name,
                map=map_,
                evidence=evidence,
                links=judged[int(index)].links,
                residual=judged[int(index)].after,
                group=label,
                outlier=False,
                sentence=sentence,
            )
        )
    return frames


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
