"""Hearing one reference: pairs first, palettes only where there are none."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Colours
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.evidence.estimate import Estimate, fit_camera
from hueferry.evidence.evidence import Basis
from hueferry.evidence.likeness import hear_palettes, hear_saved_palette
from hueferry.evidence.pairs import Pairs, find_pairs
from hueferry.evidence.prior import Prior
from hueferry.evidence.reduced import Reduced
from hueferry.evidence.refine import WIDTHS, Correction, fit_correction
from hueferry.evidence.witness import Witness
from hueferry.palettes.palette import Palette

PER_BLOCK = 40.0
"""Independent pairs that one block of the picture is worth at most: neighbours err alike."""

LEAST_GAIN = 0.1
"""ΔE00 by which a judged fit must bring unseen pairs nearer."""

LEAST_REFINEMENT = 0.03
"""ΔE00 by which a correction must beat the camera map on unseen pairs."""

Errors = NDArray[np.float64]


def hear(source: Reduced, reference: Reduced | Palette, prior: Prior) -> Witness:
    """Hear what `reference` says about the change from `source` to it."""
    if isinstance(reference, Palette):
        return hear_saved_palette(source, reference, prior)
    pairs = find_pairs(source, reference)
    if pairs is not None:
        witness = hear_pairs(pairs, prior)
        if witness.basis is Basis.PAIRS or witness.judged is not None:
            return witness
    return hear_palettes(source, reference, prior)


def hear_pairs(pairs: Pairs, prior: Prior) -> Witness:
    """Fit the camera map to pairs, and judge it on blocks that a fit to the other blocks has not seen."""
    estimate = _fit(pairs, prior)
    before, after = _judge(pairs, prior, estimate)
    best = min(after, key=lambda width: after[width] + (0.0 if width is None else LEAST_REFINEMENT))
    judged = before, after[best]
    if before - after[best] < LEAST_GAIN:
        reason = f"the surfaces seen in both pictures already agree within {before:.1f} ΔE00"
        return Witness(basis=Basis.NONE, reason=reason, pairs=pairs, judged=judged)
    return Witness(
        basis=Basis.PAIRS,
        parameters=estimate.map.parameters,
        precision=np.linalg.inv(estimate.covariance) - prior.precision,
        pairs=pairs,
        judged=judged,
        correction=None if best is None else _correct(pairs, estimate, best),
    )


def _fit(pairs: Pairs, prior: Prior, *, start: Estimate | None = None) -> Estimate:
    return fit_camera(
        pairs.source,
        pairs.reference,
        weights=pairs.weights,
        prior=prior,
        effective=min(PER_BLOCK * len(np.unique(pairs.blocks)), float(len(pairs))),
        ends=(pairs.low, pairs.high),
        start=None if start is None else start.map.parameters,
    )


def _correct(pairs: Pairs, estimate: Estimate, width: float) -> Correction:
    residual = pairs.residual(estimate.map(pairs.source))
    return fit_correction(pairs.source, residual, weights=pairs.weights, width=width)


def _judge(pairs: Pairs, prior: Prior, full: Estimate) -> tuple[float, dict[float | None, float]]:
    """Return mean ΔE00 of pairs before, and after maps fitted to the other half of the blocks, by width of correction.

    The farthest tenth is left out: mismatched pairs say nothing about a map.
    """
    half = (pairs.blocks // 4 + pairs.blocks) % 2 == 0
    if half.all() or not half.any():
        half = np.arange(len(pairs)) % 2 == 0
    errors: dict[float | None, Errors] = {width: np.empty(len(pairs)) for width in (None, *WIDTHS)}
    for chosen in (half, ~half):
        seen, unseen = pairs.part(chosen), pairs.part(~chosen)
        fitted = _fit(seen, prior, start=full)
        carried = fitted.map(unseen.source)
        for width, error in errors.items():
            added = 0.0 if width is None else _correct(seen, fitted, width)(unseen.source)
            error[~chosen] = _differences(unseen, carried + added)
    return _trimmed(_differences(pairs, pairs.source)), {width: _trimmed(error) for width, error in errors.items()}


def _differences(pairs: Pairs, carried: Colours) -> Errors:
    """Return (n,) ΔE00 between what was carried over and the reference, whose clipped channels are bounds."""
    return delta_e_2000(oklab_to_lab(carried), oklab_to_lab(carried + pairs.residual(carried)))


def _trimmed(errors: Errors) -> float:
    return float(np.sort(errors)[: max(1, int(0.9 * len(errors)))].mean())
