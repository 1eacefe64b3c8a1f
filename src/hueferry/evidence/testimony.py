"""Hearing one reference: pairs first, palettes only where there are none."""

from __future__ import annotations

import numpy as np

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.evidence.camera import SIZE
from hueferry.evidence.estimate import Estimate, fit_camera
from hueferry.evidence.evidence import Basis
from hueferry.evidence.likeness import hear_palettes
from hueferry.evidence.pairs import Pairs, find_pairs
from hueferry.evidence.prior import Prior
from hueferry.evidence.reduced import Reduced
from hueferry.evidence.witness import Witness

PER_BLOCK = 40.0
"""Independent pairs that one block of the picture is worth at most: neighbours err alike."""

LEAST_GAIN = 0.1
"""ΔE00 by which a judged fit must bring unseen pairs nearer."""

WORST_FIT = 0.6
"""Share of the difference that may be left on unseen pairs; more, and it is no change of light that differs."""


def hear(source: Reduced, reference: Reduced, prior: Prior) -> Witness:
    """Hear what `reference` says about the change from `source` to it."""
    pairs = find_pairs(source, reference)
    if pairs is not None:
        witness = hear_pairs(pairs, prior)
        if witness.basis is Basis.PAIRS or witness.judged is not None:
            return witness
    return hear_palettes(source, reference, prior)


def hear_pairs(pairs: Pairs, prior: Prior) -> Witness:
    """Fit the camera map to pairs, and judge it on blocks that a fit to the other blocks has not seen."""
    estimate = _fit(pairs, np.ones(len(pairs), dtype=bool), prior)
    judged = _judge(pairs, prior, estimate)
    before, after = judged
    if before - after < LEAST_GAIN:
        reason = (
            f"the surfaces seen in both pictures already agree within {before:.1f} ΔE00, and no map brings them nearer"
        )
        return _silent(reason, pairs, judged)
    precision = np.linalg.inv(estimate.covariance) - prior.precision
    return Witness(
        basis=Basis.PAIRS, parameters=estimate.map.parameters, precision=precision, pairs=pairs, judged=judged
    )


def _silent(reason: str, pairs: Pairs, judged: tuple[float, float]) -> Witness:
    zero = np.zeros((SIZE, SIZE))
    return Witness(
        basis=Basis.NONE, parameters=np.zeros(SIZE), precision=zero, reason=reason, pairs=pairs, judged=judged
    )


def _fit(pairs: Pairs, chosen: np.ndarray, prior: Prior, *, start: Estimate | None = None) -> Estimate:
    effective = min(PER_BLOCK * len(np.unique(pairs.blocks[chosen])), float(chosen.sum()))
    return fit_camera(
        pairs.source[chosen],
        pairs.reference[chosen],
        weights=pairs.weights[chosen],
        prior=prior,
        effective=effective,
        start=None if start is None else start.map.parameters,
    )


def _judge(pairs: Pairs, prior: Prior, full: Estimate) -> tuple[float, float]:
    """Return the median ΔE00 of pairs before, and after maps fitted to the other half of the blocks."""
    half = (pairs.blocks // 4 + pairs.blocks) % 2 == 0
    if half.all() or not half.any():
        half = np.arange(len(pairs)) % 2 == 0
    goal = oklab_to_lab(pairs.reference)
    after = np.empty(len(pairs))
    for seen in (half, ~half):
        fitted = _fit(pairs, seen, prior, start=full)
        after[~seen] = delta_e_2000(oklab_to_lab(fitted.map(pairs.source[~seen])), goal[~seen])
    before = delta_e_2000(oklab_to_lab(pairs.source), goal)
    return float(np.median(before)), float(np.median(after))
