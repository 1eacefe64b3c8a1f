"""What stays fixed while a series is solved, and so decides what it is brought towards."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import attrs
import numpy as np

from hueferry.evidence.agree import agree
from hueferry.evidence.camera import NAMES, SIZE, Parameters
from hueferry.evidence.evidence import Basis
from hueferry.evidence.prior import Prior, no_change
from hueferry.evidence.reduced import Reduced
from hueferry.palettes.palette import Palette
from hueferry.series.candidates import Pair
from hueferry.series.groups import Labels, medoid
from hueferry.series.links import Link
from hueferry.series.views import View


@attrs.frozen(eq=False)
class LinkedSeries:
    """The pictures in the order of names, the references behind them, and what was found between them.

    Attributes:
        views: pictures, then references.
        pictures: how many are pictures.
        targets: what pictures without links are brought towards: references, or a palette, or nothing.
        links: by indices into the views.
        labels: (n,) group of each view.
    """

    views: Sequence[View]
    pictures: int
    targets: Sequence[Reduced | Palette]
    links: Mapping[Pair, Link]
    labels: Labels

    @property
    def references(self) -> range:
        """Indices of the references."""
        return range(self.pictures, len(self.views))

    @property
    def anchored(self) -> set[int]:
        """Groups that hold a reference."""
        return {int(self.labels[index]) for index in self.references}


def priors_of(series: LinkedSeries) -> list[Prior]:
    """Exposure values bear witness where there is one reference, and it has one."""
    known = [series.views[index].exposure for index in series.references]
    told = known[0] if len(known) == 1 else None
    return [no_change(source_exposure=view.exposure, reference_exposure=told) for view in series.views]


def fix_gauge(series: LinkedSeries) -> tuple[dict[int, Parameters], int | None]:
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
