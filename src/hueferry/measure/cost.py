"""Every figure that separates two palettes, with its unit."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

import attrs
import numpy as np

from hueferry.measure import divergences, normals
from hueferry.measure.bins import shared_histograms
from hueferry.measure.cloud import LabCloud
from hueferry.measure.lines import sliced_distance
from hueferry.measure.transport_costs import (
    bracketed_w2,
    exact_w1,
    exact_w2,
    gaussian_w2,
    sinkhorn_divergence,
)
from hueferry.measure.transport_costs import sliced_w2 as estimate_sliced_w2
from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import thin

SCHEMA = "hueferry/cost-1"
EXACT_COLOURS = 512
"""Colours to which palettes are thinned for exact plans: a tenth of a second each."""
ENTROPIC_COLOURS = 256
QUICK_COLOURS = 128

_DELTA_E = "ΔE*ab (CIE 1976, D50)"
_RMS = "ΔE*ab, root mean square (CIE 1976, D50)"

UNITS: Mapping[str, str] = MappingProxyType(
    {
        "w1": "ΔE*ab, mean (CIE 1976, D50)",
        "w1_gap": "ΔE*ab, mean (CIE 1976, D50)",
        "w2": _RMS,
        "w2_gap": _RMS,
        "reduction_bound": _RMS,
        "sliced_w2": _RMS,
        "sliced_w2_error": _RMS,
        "gaussian_w2": _RMS,
        "sinkhorn_divergence": _RMS,
        "mean_shift": _DELTA_E,
        "mean_shift_l": "L* (D50)",
        "mean_shift_a": "a* (D50)",
        "mean_shift_b": "b* (D50)",
        "kl": "nat",
        "kl_reverse": "nat",
        "jeffreys": "nat",
        "jensen_shannon": "nat, 0 … 0.693",
        "hellinger": "1, 0 … 1",
        "bhattacharyya": "nat",
        "fisher_rao": "1, 0 … 3.142",
        "normal_kl": "nat",
        "normal_kl_reverse": "nat",
        "normal_jeffreys": "nat",
        "normal_hellinger": "1, 0 … 1",
        "normal_bhattacharyya": "nat",
        "normal_fisher_rao_l": "1",
        "normal_fisher_rao_a": "1",
        "normal_fisher_rao_b": "1",
        "normal_fisher_rao_lower": "1",
        "normal_fisher_rao_upper": "1",
    }
)
"""The unit of every figure of `Cost`, by name."""


@attrs.frozen
class Cost:
    """What separates two palettes; a figure that was not computed is None. `UNITS` names the units.

    Attributes:
        gaussian_w2: W2 between the normals fitted to both: means and spreads alone.
        sliced_w2: root mean square of W2 over lines through the colours.
        w2: root mean square shift of the cheapest plan.
        w2_gap: `w2` is proven from below, and not larger than `w2` + `w2_gap`.
        mean_shift: distance of the mean colours; `_l`, `_a`, `_b` from the first to the second, signed.
        w1: mean shift of the cheapest plan.
        w1_gap: as for `w2`.
        reduction_bound: how much W1 and W2 of all pixels can differ from those of the palettes, at most, to first
            order: the sum of both palettes' quantisation errors.
        sliced_w2_error: standard error of `sliced_w2` from the choice of lines.
        sinkhorn_divergence: square root of the Sinkhorn divergence at a blur of 5 ΔE*ab.
        kl: Kullback–Leibler divergence of the second histogram from the first, in bins of 10 CIELAB units; infinite
            where the first has colours in bins in which the second has none.
        kl_reverse: the same the other way round.
        jeffreys: sum of the two.
        jensen_shannon: Jensen–Shannon divergence of the histograms.
        hellinger: Hellinger distance of the histograms.
        bhattacharyya: Bhattacharyya distance of the histograms.
        fisher_rao: Fisher–Rao distance of the histograms.
        normal_kl: as `kl`, of the normals with the palettes' means and covariances; the names with `normal_` likewise.
        normal_kl_reverse: the same the other way round.
        normal_jeffreys: sum of the two.
        normal_hellinger: Hellinger distance of the normals.
        normal_bhattacharyya: Bhattacharyya distance of the normals.
        normal_fisher_rao_l: Fisher–Rao distance of the normals of L* alone; `_a` and `_b` likewise.
        normal_fisher_rao_a: of a* alone.
        normal_fisher_rao_b: of b* alone.
        normal_fisher_rao_lower: the Fisher–Rao distance of the full normals is at least this (Calvo & Oller 1990).
        normal_fisher_rao_upper: and at most this (length of a path).
    """

    gaussian_w2: float
    sliced_w2: float
    w2: float
    w2_gap: float
    mean_shift: float
    mean_shift_l: float
    mean_shift_a: float
    mean_shift_b: float
    w1: float | None = None
    w1_gap: float | None = None
    reduction_bound: float | None = None
    sliced_w2_error: float | None = None
    sinkhorn_divergence: float | None = None
    kl: float | None = None
    kl_reverse: float | None = None
    jeffreys: float | None = None
    jensen_shannon: float | None = None
    hellinger: float | None = None
    bhattacharyya: float | None = None
    fisher_rao: float | None = None
    normal_kl: float | None = None
    normal_kl_reverse: float | None = None
    normal_jeffreys: float | None = None
    normal_hellinger: float | None = None
    normal_bhattacharyya: float | None = None
    normal_fisher_rao_l: float | None = None
    normal_fisher_rao_a: float | None = None
    normal_fisher_rao_b: float | None = None
    normal_fisher_rao_lower: float | None = None
    normal_fisher_rao_upper: float | None = None

    def as_dict(self) -> dict[str, object]:
        """Return the computed figures as JSON values.

        JSON has no infinity: an infinite figure is null, and its name is listed under "infinite".
        """
        known = {name: value for name in UNITS if (value := getattr(self, name)) is not None}
        finite: dict[str, object] = {name: value if math.isfinite(value) else None for name, value in known.items()}
        finite["infinite"] = [name for name, value in known.items() if not math.isfinite(value)]
        return finite


def measure(first: Palette, second: Palette, *, seed: int = 0) -> Cost:
    """Return every figure that separates two palettes; transport costs in CIELAB relative to the ICC's D50.

    Args:
        first: an Oklab palette.
        second: an Oklab palette.
        seed: of the lines of the sliced distance.
    """
    p, q = LabCloud.of(first), LabCloud.of(second)
    thinned = _thinned(first, second, EXACT_COLOURS)
    w1, w2, sliced = exact_w1(*thinned), exact_w2(*thinned), estimate_sliced_w2(p, q, seed=seed)
    return Cost(
        gaussian_w2=gaussian_w2(p, q),
        sliced_w2=sliced.value,
        sliced_w2_error=sliced.error,
        w1=w1.value,
        w1_gap=w1.gap,
        w2=w2.value,
        w2_gap=w2.gap,
        reduction_bound=thinned[0].spread + thinned[1].spread,
        sinkhorn_divergence=sinkhorn_divergence(*_thinned(first, second, ENTROPIC_COLOURS)),
        **_mean_shift(p, q),
        **_of_histograms(p, q),
        **_of_normals(p, q),
    )


def quick_cost(first: Palette, second: Palette) -> Cost:
    """Return the transport costs alone, in a few hundredths of a second.

    W2 is that of palettes thinned to 128 colours, bracketed by an entropic plan instead of solved.
    """
    p, q = LabCloud.of(first), LabCloud.of(second)
    w2 = bracketed_w2(*_thinned(first, second, QUICK_COLOURS))
    return Cost(
        gaussian_w2=gaussian_w2(p, q),
        sliced_w2=sliced_distance(p, q, directions=32),
        w2=w2.value,
        w2_gap=w2.gap,
        **_mean_shift(p, q),
    )


def sliced_w2(first: Palette, second: Palette) -> float:
    """Return the sliced W2 in ΔE*ab (D50) over 64 evenly spread lines; without randomness."""
    return sliced_distance(LabCloud.of(first), LabCloud.of(second))


def _thinned(first: Palette, second: Palette, size: int) -> tuple[LabCloud, LabCloud]:
    return LabCloud.of(thin(first, size)), LabCloud.of(thin(second, size))


def _mean_shift(p: LabCloud, q: LabCloud) -> dict[str, float]:
    step = q.mean - p.mean
    signed = {f"mean_shift_{channel}": float(value) for channel, value in zip("lab", step, strict=True)}
    return {"mean_shift": float(np.linalg.norm(step)), **signed}


def _of_histograms(p: LabCloud, q: LabCloud) -> dict[str, float]:
    shares = shared_histograms(p, q)
    return {
        "kl": divergences.kullback_leibler(*shares),
        "kl_reverse": divergences.kullback_leibler(*shares[::-1]),
        "jeffreys": divergences.jeffreys(*shares),
        "jensen_shannon": divergences.jensen_shannon(*shares),
        "hellinger": divergences.hellinger(*shares),
        "bhattacharyya": divergences.bhattacharyya(*shares),
        "fisher_rao": divergences.fisher_rao(*shares),
    }


def _of_normals(p: LabCloud, q: LabCloud) -> dict[str, float]:
    first, second = p.normal, q.normal
    lower, upper = normals.fisher_rao_bounds(first, second)
    by_channel = {
        f"normal_fisher_rao_{name}": normals.fisher_rao_1d(first.along(channel), second.along(channel))
        for channel, name in enumerate("lab")
    }
    return {
        "normal_kl": normals.kullback_leibler(first, second),
        "normal_kl_reverse": normals.kullback_leibler(second, first),
        "normal_jeffreys": normals.jeffreys(first, second),
        "normal_hellinger": normals.hellinger(first, second),
        "normal_bhattacharyya": normals.bhattacharyya(first, second),
        **by_channel,
        "normal_fisher_rao_lower": lower,
        "normal_fisher_rao_upper": upper,
    }
