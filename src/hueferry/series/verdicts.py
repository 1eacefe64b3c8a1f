"""What the joint solution left between a picture and its partners, and the evidence that goes on record."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours, Weights
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.evidence.camera import CameraMap
from hueferry.evidence.estimate import expected_error
from hueferry.evidence.evidence import Basis, Evidence
from hueferry.evidence.prior import Prior
from hueferry.maps.protocol import Map
from hueferry.series.candidates import Pair
from hueferry.series.joint import JointFit
from hueferry.series.links import Link
from hueferry.series.views import View

TRIMMED = 0.9
"""Share of the colours of a link that are judged, the nearest: mistaken pairs say nothing about a map."""

_SAMPLE = 300


@attrs.frozen(eq=False)
class Judged:
    """How one picture stands to its partners.

    Attributes:
        links: how many partners it has.
        pairs: paired colours in all links.
        coverage: largest share of the picture that a partner shows.
        inliers: keypoints explained in all links.
        before: mean ΔE00 between its colours as they are and those that its partners have after the solution.
        after: the same for its colours after the solution.
        trust: how far its links were believed, the best of them.
        share: how much of what is known about its map came from links, 0 … 1.
        error: mean ΔE00 that its map is expected to be off, its partners being right.
        moved: mean ΔE00 by which the map moves the picture.
    """

    links: int = 0
    pairs: int = 0
    coverage: float = 0.0
    inliers: int = 0
    before: float = 0.0
    after: float = 0.0
    trust: float = 0.0
    share: float = 0.0
    error: float = 0.0
    moved: float = 0.0


def judge(views: Sequence[View], links: Mapping[Pair, Link], fit: JointFit, priors: Sequence[Prior]) -> list[Judged]:
    """Judge every picture on its links."""
    seen: list[list[tuple[Colours, Colours, Link, float]]] = [[] for _ in views]
    maps = [CameraMap(parameters) for parameters in fit.parameters]
    for ((i, j), link), trust in zip(links.items(), fit.trust, strict=True):
        first, second = maps[i](link.first), maps[j](link.second)
        seen[i].append((link.first, second, link, float(trust)))
        seen[j].append((link.second, first, link, float(trust)))
    return [_judged(view, maps[k], seen[k], fit.precision[k], priors[k]) for k, view in enumerate(views)]


def _judged(
    view: View,
    map_: CameraMap,
    seen: Sequence[tuple[Colours, Colours, Link, float]],
    precision: NDArray[np.float64],
    prior: Prior,
) -> Judged:
    if not seen:
        return Judged()
    colours = view.colours[:: max(1, len(view.colours) // _SAMPLE)]
    covariance = np.asarray(np.linalg.inv(precision))
    believed = np.array([trust for *_, trust in seen]) + 1e-6
    before = [_difference(own, wanted, link.weights) for own, wanted, link, _ in seen]
    after = [_difference(map_(own), wanted, link.weights) for own, wanted, link, _ in seen]
    return Judged(
        links=len(seen),
        pairs=sum(len(link) for *_, link, _ in seen),
        coverage=max(link.coverage for *_, link, _ in seen),
        inliers=sum(link.inliers for *_, link, _ in seen),
        before=float(np.average(before, weights=believed)),
        after=float(np.average(after, weights=believed)),
        trust=float(believed.max()),
        share=float(1 - np.trace(covariance @ prior.precision) / len(covariance)),
        error=expected_error(map_, map_.parameters, covariance, colours),
        moved=mean_difference(map_(colours), colours),
    )


def mean_difference(colours: Colours, others: Colours) -> float:
    """Mean ΔE00 between (n, 3) Oklab colours, row by row."""
    return float(delta_e_2000(oklab_to_lab(colours), oklab_to_lab(others)).mean())


def _difference(colours: Colours, others: Colours, weights: Weights) -> float:
    errors = delta_e_2000(oklab_to_lab(colours), oklab_to_lab(others))
    order = np.argsort(errors, kind="stable")[: max(1, int(TRIMMED * len(errors)))]
    return float(np.average(errors[order], weights=weights[order]))


def evidence_of(map_: Map, judged: Judged) -> Evidence:
    """Return what the map of a linked picture rests on."""
    partners = "another picture" if judged.links == 1 else f"{judged.links} other pictures"
    return Evidence(
        basis=Basis.PAIRS,
        decision=(
            f"Moved by {judged.moved:.1f} ΔE00 on average, because it shows surfaces that {partners} of the series "
            f"show too; solved together, {judged.after:.1f} of {judged.before:.1f} ΔE00 is left between them."
        ),
        pairs_share=judged.share,
        palette_share=0.0,
        prior_share=1 - judged.share,
        pairs=judged.pairs,
        coverage=judged.coverage,
        inliers=judged.inliers,
        expected_error=judged.error,
        moved=judged.moved,
        judged_before=judged.before,
        judged_after=judged.after,
        camera=map_.as_dict() if isinstance(map_, CameraMap) else {},
    )
